/** Frames that must not be used. */
export interface ExcludedFrames {
  firstFrame: number
  frameCount: number
}

export interface Remainder {
  first: number
  count: number
  /** Frames of the range that are excluded lie in it. */
  touched: boolean
}

/** The longest unbroken part of frames [first, first + count) without any excluded one; of equal parts the earliest. */
export function withoutExcluded(first: number, count: number, excluded: readonly ExcludedFrames[]): Remainder {
  const end = first + count
  const inside = excluded
    .filter(({ firstFrame, frameCount }) => frameCount > 0 && firstFrame < end && firstFrame + frameCount > first)
    .sort((a, b) => a.firstFrame - b.firstFrame)
  const best = { first, count: inside.length ? 0 : count, touched: inside.length > 0 }
  let from = first
  for (const { firstFrame, frameCount } of [...inside, ...inside.length ? [{ firstFrame: end, frameCount: 0 }] : []]) {
    if (firstFrame - from > best.count) Object.assign(best, { first: from, count: firstFrame - from })
    from = Math.max(from, firstFrame + frameCount)
  }
  return best
}
