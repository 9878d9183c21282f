import type { FrameLoss } from '../../shared/measurement'

export type { FrameLoss } from '../../shared/measurement'

/**
 * Clip times that say when each frame was exposed: from the first frame after each loss on they are later by what was lost
 * (earlier where frames were doubled).
 *
 * @param losses in order of `frame`; where a loss is uncertain its last possible place counts
 * @returns a new array, the times as they are when nothing was lost
 */
export function correctFrameTimes(frameTimesSeconds: ArrayLike<number>, losses: readonly FrameLoss[]): Float64Array {
  const corrected = Float64Array.from(frameTimesSeconds)
  for (const { frame, lostSeconds } of losses) {
    for (let k = frame; k < corrected.length; k++) corrected[k] += lostSeconds
  }
  return corrected
}
