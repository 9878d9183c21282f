/** One step of the path: from frame `frame` on the light is that of `shift` frames later than the clip's times say. */
export interface ShiftStep {
  frame: number
  /** Frames before `frame` at which the step could be as well. */
  uncertainFrames: number
  shift: number
}

/** Cost of a step in nats: what chance would have to bring about to be taken for one. */
const stepNats = 45
/** No single frame says more than this, so that flashes cannot make a step. */
const mostNats = 12.5
/** A place of a step this much less likely than the best is still possible. */
const placeNats = 7

/**
 * The likeliest course of whole-frame shifts over a clip, by dynamic programming (Viterbi 1967): every frame's light is
 * compared with the prediction at each shift, and each change of shift costs as much as 45 nats of misfit.
 *
 * @param misfit squared error over twice its variance of frame `k` at `shift` frames later, NaN where nothing is known
 * @param frames number of frames
 * @param reach largest shift
 * @returns shift of the first frame and the steps after it, in order
 */
export function shiftPath(misfit: (frame: number, shift: number) => number, frames: number, reach: number): { first: number, steps: ShiftStep[] } {
  const width = 2 * reach + 1
  const from = new Int16Array(frames * width)
  let cost = new Float64Array(width)
  for (let k = 0; k < frames; k++) {
    let cheapest = 0
    for (let state = 1; state < width; state++) if (cost[state] < cost[cheapest]) cheapest = state
    const next = new Float64Array(width)
    for (let state = 0; state < width; state++) {
      const jump = k > 0 && cost[cheapest] + stepNats < cost[state]
      const value = misfit(k, state - reach)
      from[k * width + state] = jump ? cheapest : state
      next[state] = (jump ? cost[cheapest] + stepNats : cost[state]) + (Number.isNaN(value) ? 0 : Math.min(mostNats, value))
    }
    cost = next
  }
  let state = reach
  for (let other = 0; other < width; other++) if (cost[other] < cost[state]) state = other
  const steps: ShiftStep[] = []
  for (let k = frames - 1; k >= 0; k--) {
    const before = from[k * width + state]
    if (before !== state) steps.unshift({ frame: k, uncertainFrames: 0, shift: state - reach })
    state = before
  }
  const first = state - reach
  return { first, steps: steps.map((step, s) => placeStep(misfit, steps[s - 1]?.frame ?? 0, step, steps[s + 1]?.frame ?? frames, s === 0 ? first : steps[s - 1].shift)) }
}

/** Every place between the neighbouring steps at which this one explains the light nearly as well: the last one, and how many before it. */
function placeStep(misfit: (frame: number, shift: number) => number, begin: number, step: ShiftStep, end: number, shiftBefore: number): ShiftStep {
  const gain = (k: number) => {
    const value = misfit(k, shiftBefore) - misfit(k, step.shift)
    return Number.isNaN(value) ? 0 : value
  }
  // Cost of a step at g over that at `step.frame`.
  let best = 0
  const costs: { frame: number, cost: number }[] = [{ frame: step.frame, cost: 0 }]
  for (let k = step.frame, cost = 0; k < end - 1; k++) {
    cost += gain(k)
    best = Math.min(best, cost)
    costs.push({ frame: k + 1, cost })
    if (cost > best + 20 * placeNats) break
  }
  for (let k = step.frame - 1, cost = 0; k > begin; k--) {
    cost -= gain(k)
    best = Math.min(best, cost)
    costs.push({ frame: k, cost })
    if (cost > best + 20 * placeNats) break
  }
  const possible = costs.filter(({ cost }) => cost <= best + placeNats).map(({ frame }) => frame)
  const last = Math.max(...possible)
  return { ...step, frame: last, uncertainFrames: last - Math.min(...possible) }
}
