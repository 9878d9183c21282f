import { lastNotAbove, type FrameIndex } from './frameIndex'

export interface FrameRange {
  firstFrame: number
  frameCount: number
}

/** Ranges that one decoding run serves, from the entry at which it begins. */
export interface DecodeRun {
  /** Number of the entry in `index.entryFrames`; −1 is the start of the clip. */
  entry: number
  ranges: FrameRange[]
}

/** Starting another ffmpeg and seeking costs about as much as decoding these many frames. */
const startCostFrames = 24

/** Ascending ranges that neither touch nor overlap, within the clip; empty ones are left out. */
export function normalizeRanges(ranges: readonly FrameRange[], frameCount: number): FrameRange[] {
  const merged: FrameRange[] = []
  for (const { firstFrame, frameCount: length } of ranges.filter(range => range.frameCount > 0).sort((a, b) => a.firstFrame - b.firstFrame)) {
    if (!Number.isInteger(firstFrame) || !Number.isInteger(length) || firstFrame < 0 || firstFrame + length > frameCount) throw new RangeError(`Frames ${firstFrame} to ${firstFrame + length - 1} are not all within the clip of ${frameCount} frames.`)
    const before = merged.at(-1)
    const end = before ? before.firstFrame + before.frameCount : -1
    if (before && firstFrame <= end) before.frameCount = Math.max(end, firstFrame + length) - before.firstFrame
    else merged.push({ firstFrame, frameCount: length })
  }
  return merged
}

/** Frames to decode for these ranges: each run begins at the last entry at or before its first frame (one more with a run-up). */
export function planRuns(ranges: readonly FrameRange[], { entryFrames }: Pick<FrameIndex, 'entryFrames'>): DecodeRun[] {
  const runs: DecodeRun[] = []
  let end = 0
  for (const range of ranges) {
    const entry = lastNotAbove(entryFrames, range.firstFrame)
    const begin = entry < 0 ? 0 : entryFrames[entry]
    const current = runs.at(-1)
    if (current && begin <= end + startCostFrames) current.ranges.push(range)
    else runs.push({ entry, ranges: [range] })
    end = range.firstFrame + range.frameCount
  }
  return runs
}
