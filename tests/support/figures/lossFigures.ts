import { alignClip } from '../../../jobs/signal/align'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { seededRandom } from '../forward/random'
import { drawTake } from './alignTakes'

export interface LossFigures {
  cases: number
  /** Losses put in, and those found with their true size and their true place in the range named. */
  made: number
  found: number
  /** Losses named where there was none. */
  invented: number
  /** Sure results with a loss missed, invented or misplaced, or with offset or drift off by more than 0.01 frame or 3 ppm. */
  silent: number
  unsure: number
  medianUncertainFrames: number
}

/** Seeded takes of 25 to 90 s with `losses(seed)` gaps of 1 to 12 frames, one in five of them doubled frames instead. */
export function lossFigures(cases: number, losses: (seed: number) => number, firstSeed = 3001, onCase: (line: string) => void = () => {}): LossFigures {
  const figures = { cases, made: 0, found: 0, invented: 0, silent: 0, unsure: 0, medianUncertainFrames: 0 }
  const uncertain: number[] = []
  for (let seed = firstSeed; seed < firstSeed + cases; seed++) {
    const uniform = seededRandom(seed)
    // Places in shares of the clip's shared part, far enough from its ends and from one another.
    const count = losses(seed)
    const places = Array.from({ length: count }, (_, n) => (n + 0.3 + 0.4 * uniform()) / count)
    const sizes = places.map(() => uniform() < 0.2 ? -1 - Math.floor(2 * uniform()) : 1 + Math.floor(12 * uniform() ** 2))
    const seconds = 25 + 65 * uniform()
    const offsetSeconds = -20 + 40 * uniform()
    let made: { frame: number, lostFrames: number }[] = []
    const rate = [25, 30, 50, 60][Math.floor(4 * uniform())]!
    const start = Math.max(0, -offsetSeconds)
    made = places.map((place, n) => ({ frame: Math.round((start + 3 + place * (seconds - 6)) * rate), lostFrames: sizes[n]! }))
    const take = drawTake(seed, {
      seconds: [25, 90], change: { frameRateHz: rate, seconds, offsetSeconds },
      exposedAt: frame => made.reduce((at, loss) => frame >= loss.frame ? at + loss.lostFrames : at, frame),
    })
    const started = performance.now()
    const result = alignClip({ ...take, darkLevel: null })
    const milliseconds = performance.now() - started
    const matched = made.filter(loss => result.losses.some(({ frame, uncertainFrames, lostFrames }) => lostFrames === loss.lostFrames && loss.frame <= frame && loss.frame >= frame - uncertainFrames))
    const invented = Math.max(0, result.losses.length - matched.length)
    const offsetFrames = Math.abs(result.offsetSeconds - take.offsetSeconds) * take.frameRateHz
    const driftPpm = Math.abs(result.driftPpm - take.driftPpm)
    const right = matched.length === made.length && invented === 0 && offsetFrames <= 0.01 && driftPpm <= 3
    const sure = result.confidence >= alignmentReviewBelow
    figures.made += made.length
    figures.found += matched.length
    figures.invented += invented
    if (!sure) figures.unsure++
    else if (!right) figures.silent++
    uncertain.push(...result.losses.map(loss => loss.uncertainFrames))
    onCase(`${seed} ${right ? 'ok' : 'MISS'} ${sure ? 'sure' : 'unsure'} ${result.confidence.toFixed(2)} made ${made.map(l => `${l.frame}:${l.lostFrames}`).join()} found ${result.losses.map(l => `${l.frame - l.uncertainFrames}-${l.frame}:${l.lostFrames}(${(l.lostSeconds * rate).toFixed(2)})`).join()} off ${offsetFrames.toFixed(4)} drift ${driftPpm.toFixed(2)} ${take.frameLight.length} frames at ${rate} ${milliseconds.toFixed(0)} ms`)
  }
  figures.medianUncertainFrames = uncertain.sort((a, b) => a - b)[uncertain.length >> 1] ?? 0
  return figures
}
