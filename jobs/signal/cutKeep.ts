import type { Group } from '../../shared/measurement'
import { withoutExcluded, type ExcludedFrames } from './cutExcluded'
import type { FrameSpan } from './cutSpans'

/** Share of the frames inside that a kept choice must still use, as any choice must. */
const leastShare = 0.9
/**
 * A kept choice may leak a quarter more than the best one plus a thousandth of A. The leak is measured (C and S carry it),
 * it only turns the three columns towards each other: a thousandth is far below the 1 % that amplitudes are good to.
 */
const errorFactor = 1.25
const errorSlack = 0.001

/** The group of the earlier cut that shares most frames with this one, of the same line, repetition and role. */
export function findEarlier(group: Pick<Group, 'line' | 'repetition' | 'role' | 'firstFrame' | 'frameCount'>, keep: readonly Group[]): Group | null {
  let best: Group | null = null
  let most = 0
  for (const other of keep) {
    if (other.line !== group.line || other.repetition !== group.repetition || other.role !== group.role) continue
    const common = Math.min(group.firstFrame + group.frameCount, other.firstFrame + other.frameCount) - Math.max(group.firstFrame, other.firstFrame)
    if (common > most) {
      most = common
      best = other
    }
  }
  return best
}

/**
 * Seconds of guard that a frame of an earlier cut may lack: a fifth of the guard, at most a tenth of an exposure.
 *
 * With the default guard that is 0.2 ms. What is left of the guard (0.8 ms) still covers a boundary's error (0.3 ms) and
 * that of a final alignment (0.01 frame, 0.2 ms at 50 frames/s) together.
 */
export function keepSlackSeconds(guardSeconds: number, exposureSeconds: number): number {
  return Math.min(guardSeconds / 5, exposureSeconds / 10)
}

/**
 * Is an earlier choice of frames still right? All its frames lie in `widest` (inside the regime with the guard less
 * `keepSlackSeconds`), none is excluded, it uses nine tenths of `inside`, and its whole-period error is about as small as
 * the best choice's.
 */
export function stillRight(earlier: Group, widest: FrameSpan, inside: FrameSpan, excluded: readonly ExcludedFrames[], errors: { kept: number, best: number }): boolean {
  const { firstFrame, frameCount } = earlier
  return firstFrame >= widest.first && firstFrame + frameCount <= widest.first + widest.count
    && frameCount >= leastShare * inside.count
    && !withoutExcluded(firstFrame, frameCount, excluded).touched
    && errors.kept <= errorFactor * errors.best + errorSlack
}
