import type { GlancePlan } from './glance'
import { findSizeChanges, type SizeChange } from './sizeChanges'

/** Frames in front of a change and behind it that a window takes in at least. */
const before = 6
const behind = 12
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
 * window ties the clip to the record to a small part of a frame, and edges far apart give the drift.
 *
 * Each window begins with a key frame, so that no frame is decoded in vain; windows are added while all of them together
 * cost no more than 4 % of the clip or 150 frames, but three are taken whatever they cost up to a fifth of the clip.
 *
 * @returns null where fewer than two changes show or they cost too much: look at windows spread evenly then
 */
export function planChangeGlance({ frameCount, keyFrames, packetBytes }: ChangeGlanceInput): GlancePlan | null {
  const changes = findSizeChanges(packetBytes, keyFrames).slice(0, 16)
  const windows: GlancePlan['windows'] = []
  const budget = Math.max(150, 0.04 * frameCount)
  let cost = 0
  for (const { frame } of inOrderOfUse(changes, frameCount)) {
    const firstFrame = keyFrameBefore(keyFrames, Math.max(0, frame - before))
    const window = { firstFrame, frameCount: Math.min(frameCount, frame + behind) - firstFrame }
    if (cost + window.frameCount > (windows.length < 3 ? 0.2 * frameCount : budget)) break
    windows.push(window)
    cost += window.frameCount
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
    if (taken.every(other => Math.abs(other.frame - next.frame) > before + behind)) taken.push(next)
  }
  return taken
}

function keyFrameBefore(keyFrames: ArrayLike<number>, frame: number): number {
  let before = 0
  for (let k = 0; k < keyFrames.length && keyFrames[k] <= frame; k++) before = keyFrames[k]
  return before
}
