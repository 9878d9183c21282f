import { fitGain, type AlignProblem, type AlignSolution } from './alignProblem'
import { lightAt, windowMean } from './lightPrediction'
import { invert, solveLinear } from './linearSolve'

export interface Polished extends AlignSolution {
  /** Standard deviations from the residual, of the pivot's record time and of drift. */
  middleDeviationSeconds: number
  driftDeviationPpm: number
}

interface Range {
  fromFrame: number
  toFrame: number
}

/** Camera and recorder clocks rarely differ by more: a weak prior that decides where the light leaves drift open. */
const usualDriftPpm = 100

/** Gain, background and squared error at a given pivot time and drift. */
export function evaluateAt(problem: AlignProblem, range: Range, middleSeconds: number, pivotSeconds: number, driftPpm: number): AlignSolution {
  const { times, light, integrals, exposureSeconds } = problem
  let n = 0, w = 0, ww = 0, y = 0, yy = 0, wy = 0
  for (let frame = range.fromFrame; frame < range.toFrame; frame++) {
    const start = middleSeconds + (1 + driftPpm * 1e-6) * (times[frame] - pivotSeconds)
    const mean = windowMean(integrals, start, exposureSeconds)
    if (Number.isNaN(mean)) continue
    const value = light[frame]
    n++
    w += mean
    ww += mean * mean
    y += value
    yy += value * value
    wy += mean * value
  }
  return { middleSeconds, pivotSeconds, driftPpm, frames: n, ...fitGain(n, w, ww, y, yy, wy) }
}

/** Normal equations of (gain, background, pivot time in frames, drift in frames over half the span). */
function normalEquations(problem: AlignProblem, range: Range, solution: AlignSolution, driftScale: number) {
  const { times, light, integrals, exposureSeconds, frameSeconds } = problem
  const normal = new Float64Array(16)
  const right = new Float64Array(4)
  const row = new Float64Array(4)
  for (let frame = range.fromFrame; frame < range.toFrame; frame++) {
    const start = solution.middleSeconds + (1 + solution.driftPpm * 1e-6) * (times[frame] - solution.pivotSeconds)
    const mean = windowMean(integrals, start, exposureSeconds)
    if (Number.isNaN(mean)) continue
    const slope = solution.gain * (lightAt(integrals, start + exposureSeconds) - lightAt(integrals, start)) / exposureSeconds
    row[0] = mean
    row[1] = 1
    row[2] = slope * frameSeconds
    row[3] = slope * (times[frame] - solution.pivotSeconds) * driftScale * 1e-6
    const error = light[frame] - solution.gain * mean - solution.background
    for (let i = 0; i < 4; i++) {
      right[i] += row[i] * error
      for (let j = 0; j < 4; j++) normal[i * 4 + j] += row[i] * row[j]
    }
  }
  return { normal, right }
}

/**
 * Move an alignment to the nearest minimum of the squared error over pivot time and drift (gain and background follow
 * linearly), by the damped Gauss–Newton method (Levenberg 1944, Marquardt 1963).
 *
 * Steps are bounded to a quarter of a frame. With a light that says nothing about time the deviations are infinite.
 */
export function polish(problem: AlignProblem, start: AlignSolution, range: Range): Polished {
  const { frameSeconds, times } = problem
  const half = Math.max((times[range.toFrame - 1] - times[range.fromFrame]) / 2, frameSeconds)
  const driftScale = frameSeconds / half * 1e6
  let current = evaluateAt(problem, range, start.middleSeconds, start.pivotSeconds, start.driftPpm)
  let damping = 1e-3
  for (let pass = 0; pass < 40; pass++) {
    const { normal, right } = normalEquations(problem, range, current, driftScale)
    const variance = current.squares / Math.max(1, current.frames)
    const prior = (driftPpm: number) => variance * (driftPpm / usualDriftPpm) ** 2
    normal[15] += variance * (driftScale / usualDriftPpm) ** 2
    right[3] -= variance * current.driftPpm * driftScale / usualDriftPpm ** 2
    let moved = false
    for (let attempt = 0; attempt < 8 && !moved; attempt++) {
      const damped = Float64Array.from(normal)
      for (let i = 0; i < 4; i++) damped[i * 5] *= 1 + damping
      const step = solveLinear(damped, right)
      if (!step) break
      const largest = Math.max(Math.abs(step[2]), Math.abs(step[3]))
      if (largest < 1e-6) return { ...current, ...deviations(problem, range, current, driftScale) }
      const shrink = largest > 0.25 ? 0.25 / largest : 1
      const next = evaluateAt(problem, range, current.middleSeconds + shrink * step[2] * frameSeconds, current.pivotSeconds, current.driftPpm + shrink * step[3] * driftScale)
      const better = (next.squares + prior(next.driftPpm)) / next.frames < (current.squares + prior(current.driftPpm)) / current.frames
      if (better && next.frames > 0.5 * current.frames && Math.abs(next.driftPpm) <= 1.5 * problem.maxDriftPpm) {
        moved = true
        damping = Math.max(damping / 5, 1e-9)
        current = next
      } else {
        damping *= 6
      }
    }
    if (!moved) break
  }
  return { ...current, ...deviations(problem, range, current, driftScale) }
}

function deviations(problem: AlignProblem, range: Range, solution: AlignSolution, driftScale: number) {
  const { normal } = normalEquations(problem, range, solution, driftScale)
  const variance = solution.squares / Math.max(1, solution.frames - 4)
  normal[15] += variance * (driftScale / usualDriftPpm) ** 2
  const covariance = invert(normal, 4)
  if (!covariance) return { middleDeviationSeconds: Number.POSITIVE_INFINITY, driftDeviationPpm: Number.POSITIVE_INFINITY }
  return {
    middleDeviationSeconds: Math.sqrt(Math.max(0, covariance[10] * variance)) * problem.frameSeconds,
    driftDeviationPpm: Math.sqrt(Math.max(0, covariance[15] * variance)) * driftScale,
  }
}
