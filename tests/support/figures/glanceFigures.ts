import { alignClip } from '../../../jobs/signal/align'
import { glancedLight, planGlance } from '../../../jobs/signal/glance'
import { planMoreWindows } from '../../../jobs/signal/glanceMore'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { drawTake } from './alignTakes'

export interface GlanceFigures {
  cases: number
  /** Within 0.05 frame at the clip's start and sure. */
  good: number
  worstOffsetFrames: number
  medianOffsetFrames: number
  unsure: number
  silent: number
  /** Share of the clips' frames decoded. */
  meanShare: number
  largestShare: number
}

export const glanceOffsetFrames = 0.05

/** Seeded takes of 60 to 180 s, aligned from the few frames of a glance. */
export function glanceFigures(cases = 100, firstSeed = 1001, onCase: (line: string) => void = () => {}): GlanceFigures {
  const offsets: number[] = []
  const figures = { cases, good: 0, worstOffsetFrames: 0, medianOffsetFrames: 0, unsure: 0, silent: 0, meanShare: 0, largestShare: 0 }
  for (let seed = firstSeed; seed < firstSeed + cases; seed++) {
    const take = drawTake(seed, { seconds: [60, 150] })
    const keyFrames = Int32Array.from({ length: Math.ceil(take.frameLight.length / take.keyframeInterval) }, (_, k) => k * take.keyframeInterval)
    const plan = planGlance({ ...take, keyFrames })
    const started = performance.now()
    const input = { ...take, keyFrames, frameLight: glancedLight(take.frameLight, keyFrames, plan), darkLevel: null }
    let found = alignClip(input)
    let decoded = plan.decodedFrames
    let rounds = 0
    for (; rounds < 3 && found.confidence < alignmentReviewBelow; rounds++) {
      const more = planMoreWindows(input, found)
      if (!more.windows.length) break
      decoded += more.decodedFrames
      for (const { firstFrame, frameCount } of more.windows) input.frameLight.set(take.frameLight.subarray(firstFrame, firstFrame + frameCount), firstFrame)
      found = alignClip(input)
    }
    figures.meanShare += decoded / take.frameLight.length / cases
    figures.largestShare = Math.max(figures.largestShare, decoded / take.frameLight.length)
    const milliseconds = performance.now() - started
    const offsetFrames = Math.abs(found.offsetSeconds - take.offsetSeconds) * take.frameRateHz
    const sure = found.confidence >= alignmentReviewBelow
    const near = offsetFrames <= glanceOffsetFrames
    onCase(`${seed} ${near ? 'ok' : 'MISS'} ${sure ? 'sure' : 'unsure'} conf ${found.confidence.toFixed(2)} off ${offsetFrames.toFixed(4)} fr, drift ${Math.abs(found.driftPpm - take.driftPpm).toFixed(2)} ppm; true ${take.offsetSeconds.toFixed(3)} s, ${take.frameLight.length} frames at ${take.frameRateHz.toFixed(2)}, GOP ${take.keyframeInterval}, ${plan.decodedFrames} in ${plan.windows.length} windows, ${decoded} after ${rounds} more; ${milliseconds.toFixed(0)} ms${near && sure ? '' : ` | ${found.evidence.reasons.join(' ')}`}`)
    if (!sure) {
      figures.unsure++
      continue
    }
    if (near) figures.good++
    else figures.silent++
    offsets.push(offsetFrames)
    figures.worstOffsetFrames = Math.max(figures.worstOffsetFrames, offsetFrames)
  }
  figures.medianOffsetFrames = offsets.sort((a, b) => a - b)[offsets.length >> 1] ?? Number.NaN
  return figures
}
