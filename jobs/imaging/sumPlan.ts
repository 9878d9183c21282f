/** Frames first, first + 1, … of a clip. */
export interface FrameSpan {
  firstFrame: number
  frameCount: number
}

/** Frames to add to a sum (sign 1) or to take out of it (sign −1). */
export interface SumPart extends FrameSpan {
  sign: 1 | -1
}

/** How one group's sum is reached: from a sum that exists already, or from nothing. */
export interface SumTask<T extends FrameSpan, B extends FrameSpan> {
  target: T
  base: B | null
  /** Ascending, none empty; none at all when the base is the sum itself. */
  parts: SumPart[]
}

const endOf = ({ firstFrame, frameCount }: FrameSpan) => firstFrame + frameCount

/** Frames that must be decoded to turn the sum over `base` into the sum over `target`. */
function partsBetween(target: FrameSpan, base: FrameSpan): SumPart[] {
  const parts: SumPart[] = []
  const add = (from: number, to: number, sign: 1 | -1) => {
    if (to > from) parts.push({ firstFrame: from, frameCount: to - from, sign })
  }
  add(target.firstFrame, Math.min(base.firstFrame, endOf(target)), 1)
  add(base.firstFrame, Math.min(target.firstFrame, endOf(base)), -1)
  add(Math.max(target.firstFrame, endOf(base)), endOf(target), 1)
  add(Math.max(base.firstFrame, endOf(target)), endOf(base), -1)
  return parts.sort((a, b) => a.firstFrame - b.firstFrame)
}

const framesOf = (parts: readonly SumPart[]) => parts.reduce((sum, part) => sum + part.frameCount, 0)

/**
 * The least work that makes the sum of every target out of sums that exist.
 *
 * Sums of whole numbers commute, so a sum reached by difference equals the one added from nothing, bit for bit.
 *
 * @param targets groups wanted; empty ones get no task
 * @param bases sums of the same clip, transfer and range; a base may serve several targets
 * @returns a task for each target, in the order of the first frame that it needs; those that need none come first
 */
export function planSums<T extends FrameSpan, B extends FrameSpan>(targets: readonly T[], bases: readonly B[]): SumTask<T, B>[] {
  const tasks = targets.filter(target => target.frameCount > 0).map((target): SumTask<T, B> => {
    let best: SumTask<T, B> = { target, base: null, parts: [{ firstFrame: target.firstFrame, frameCount: target.frameCount, sign: 1 }] }
    for (const base of bases) {
      const parts = partsBetween(target, base)
      if (framesOf(parts) < framesOf(best.parts)) best = { target, base, parts }
    }
    return best
  })
  const first = ({ parts }: SumTask<T, B>) => parts[0]?.firstFrame ?? -1
  return tasks.sort((a, b) => first(a) - first(b))
}

/** Every frame that the tasks need, ascending, each once. */
export function framesNeeded(tasks: readonly SumTask<FrameSpan, FrameSpan>[]): FrameSpan[] {
  const spans = tasks.flatMap(task => task.parts).sort((a, b) => a.firstFrame - b.firstFrame)
  const merged: FrameSpan[] = []
  for (const { firstFrame, frameCount } of spans) {
    const before = merged.at(-1)
    if (before && firstFrame <= endOf(before)) before.frameCount = Math.max(endOf(before), firstFrame + frameCount) - before.firstFrame
    else merged.push({ firstFrame, frameCount })
  }
  return merged
}
