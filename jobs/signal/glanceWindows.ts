import type { GlancePlan } from './glance'
import { findSizeChanges, type SizeChange } from './sizeChanges'

/** Frames on each side of a change that a window takes in. */
const half = 26
const mostWindows = 4

export interface ChangeGlanceInput {
  frameCount: number
  /** Numbers of the frames at which decoding can begin, rising. */
  keyFrames: ArrayLike<number>
  /** Compressed size of each frame in display order. */
  packetBytes: ArrayLike<number>
}

/**
 * Windows around the frames where the lamp seems to change, judged by the compressed size of the frames: an edge inside a
 * window ties the clip to the record to a small part of a frame, and two edges far apart give the drift.
 *
 * Each window costs decoding from the key frame before it; windows are added while all of them together cost no more
 * than 5 % of the clip or 160 frames, but two are taken whatever they cost up to a fifth of the clip.
 *
 * @returns null where fewer than two changes show or they cost too much: look at windows spread evenly then
 */
export function planChangeGlance({ frameCount, keyFrames, packetBytes }: ChangeGlanceInput): GlancePlan | null {
  const changes = findSizeChanges(packetBytes, keyFrames).slice(0, 16)
  const windows: GlancePlan['windows'] = []
  const budget = Math.max(160, 0.05 * frameCount)
  let cost = 0
  for (const change of inOrderOfUse(changes, frameCount)) {
    const firstFrame = Math.max(0, change.frame - half)
    const window = { firstFrame, frameCount: Math.min(frameCount, change.frame + half) - firstFrame }
    const more = window.frameCount + firstFrame - keyFrameBefore(keyFrames, firstFrame)
    if (cost + more > (windows.length < 2 ? 0.2 * frameCount : budget)) break
    windows.push(window)
    cost += more
  }
  if (windows.length < 2) return null
  return { useKeyFrames: false, windows: windows.sort((a, b) => a.firstFrame - b.firstFrame), decodedFrames: cost }
}

/** The strongest first, then again and again the one that is strong and far from those taken. */
function inOrderOfUse(changes: readonly SizeChange[], frameCount: number): SizeChange[] {
  const left = [...changes]
  const taken: SizeChange[] = []
  const worth = ({ frame, strength }: SizeChange) => strength * Math.min(frameCount, ...taken.map(other => Math.abs(other.frame - frame)))
  while (left.length && taken.length < mostWindows) {
    left.sort((a, b) => worth(b) - worth(a))
    const next = left.shift()!
    if (taken.every(other => Math.abs(other.frame - next.frame) > 2 * half)) taken.push(next)
  }
  return taken
}

function keyFrameBefore(keyFrames: ArrayLike<number>, frame: number): number {
  let before = 0
  for (let k = 0; k < keyFrames.length && keyFrames[k] <= frame; k++) before = keyFrames[k]
  return before
}
