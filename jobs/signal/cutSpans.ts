/** Frames [first, first + count). */
export interface FrameSpan {
  first: number
  count: number
}

/** Frames whose exposure plus guard lies wholly inside [start, end] of record time; `starts` rise. */
export function framesInside(starts: Float64Array, exposureSeconds: number, guardSeconds: number, startSeconds: number, endSeconds: number): FrameSpan {
  const firstWhere = (from: number, holds: (frame: number) => boolean) => {
    let low = from
    let high = starts.length
    while (low < high) {
      const middle = (low + high) >> 1
      if (holds(middle)) high = middle
      else low = middle + 1
    }
    return low
  }
  const first = firstWhere(0, frame => starts[frame] - guardSeconds >= startSeconds)
  const end = firstWhere(first, frame => starts[frame] + exposureSeconds + guardSeconds > endSeconds)
  return { first, count: end - first }
}
