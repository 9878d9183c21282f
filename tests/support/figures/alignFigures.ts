import { alignClip } from '../../../jobs/signal/align'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { drawTake } from './alignTakes'

export interface AlignFigures {
  cases: number
  worstOffsetFrames: number
  worstDriftPpm: number
  medianOffsetFrames: number
  /** Cases whose confidence asks for a person. */
  unsure: number
  /** Cases that miss 0.01 frame or 3 ppm and do not say so. */
  silent: number
  /** Frame losses named, where none is in any take. */
  losses: number
}

export const largestOffsetFrames = 0.01
export const largestDriftPpm = 3

/**
 * Seeded takes that clip and record share for 20 to 60 s, aligned from complete light. `worst…` and `median…` are over the
 * cases that are sure.
 */
export function alignFigures(cases = 100, firstSeed = 1, onCase: (line: string) => void = () => {}): AlignFigures {
  const offsets: number[] = []
  const figures = { cases, worstOffsetFrames: 0, worstDriftPpm: 0, medianOffsetFrames: 0, unsure: 0, silent: 0, losses: 0 }
  for (let seed = firstSeed; seed < firstSeed + cases; seed++) {
    const take = drawTake(seed, { seconds: [20, 60] })
    const started = performance.now()
    const found = alignClip({ ...take, darkLevel: null })
    const offsetFrames = Math.abs(found.offsetSeconds - take.offsetSeconds) * take.frameRateHz
    const driftPpm = Math.abs(found.driftPpm - take.driftPpm)
    const missed = !(offsetFrames <= largestOffsetFrames && driftPpm <= largestDriftPpm)
    const sure = found.confidence >= alignmentReviewBelow
    onCase(`${seed} ${missed ? 'MISS' : 'ok'} ${sure ? 'sure' : 'unsure'} conf ${found.confidence.toFixed(2)} off ${offsetFrames.toFixed(4)} fr, drift ${driftPpm.toFixed(2)} ppm; true ${take.offsetSeconds.toFixed(3)} s ${take.driftPpm.toFixed(0)} ppm, ${take.frameLight.length} frames at ${take.frameRateHz.toFixed(2)}; ${(performance.now() - started).toFixed(0)} ms${sure && !missed ? '' : ` | ${found.evidence.reasons.join(' ')}`}`)
    figures.losses += found.losses.length
    if (!sure) {
      figures.unsure++
      continue
    }
    if (missed) figures.silent++
    offsets.push(offsetFrames)
    figures.worstOffsetFrames = Math.max(figures.worstOffsetFrames, offsetFrames)
    figures.worstDriftPpm = Math.max(figures.worstDriftPpm, driftPpm)
  }
  figures.medianOffsetFrames = offsets.sort((a, b) => a - b)[offsets.length >> 1] ?? Number.NaN
  return figures
}
