import type { LightIntegrals } from './lightPrediction'
import type { LampTone } from './lampTones'

/** What every step of the alignment works on. */
export interface AlignProblem {
  /** Measured mean light and clip time of the frames that have one. */
  light: Float64Array
  times: Float64Array
  /** Their numbers in the clip. */
  frames: Int32Array
  exposureSeconds: number
  /** Median interval between frames. */
  frameSeconds: number
  integrals: LightIntegrals
  recordSeconds: number
  tones: LampTone[]
  maxDriftPpm: number
  /** Mean square of light about its mean. */
  lightVariance: number
  /** Only a few frames of the clip are measured (key frames, windows), see `planGlance`. */
  sparse: boolean
}

/** An alignment in the making; `middleSeconds` is the record time of clip time `pivotSeconds`. */
export interface AlignSolution {
  middleSeconds: number
  pivotSeconds: number
  driftPpm: number
  gain: number
  background: number
  /** Frames whose window lies in the record, their summed squared error, and that of their light about its mean. */
  frames: number
  squares: number
  coveredSquares: number
}

export interface LinearFit {
  gain: number
  background: number
  squares: number
  /** Squares about the mean. */
  coveredSquares: number
}

/** y ≈ gain·w + background from sums; a gain below 0 is refused and leaves the variance. */
export function fitGain(n: number, w: number, ww: number, y: number, yy: number, wy: number): LinearFit {
  const sww = ww - w * w / n
  const syy = Math.max(0, yy - y * y / n)
  const swy = wy - w * y / n
  if (!(sww > 1e-12 * ww) || swy <= 0) return { gain: 0, background: y / n, squares: syy, coveredSquares: syy }
  const gain = swy / sww
  return { gain, background: (y - gain * w) / n, squares: Math.max(0, syy - gain * swy), coveredSquares: syy }
}

/**
 * What a solution explains, in nats per frame of the clip: ½·n·ln(variance of the covered light / squared error) over all
 * frames. A level part of the clip explains nothing, however well it fits, and neither does what the record does not
 * cover, so that solutions of different overlap compare fairly. Errors below 0.1 % of the light's spread count as that.
 */
export function explained(problem: AlignProblem, solution: { frames: number, squares: number, coveredSquares: number }): number {
  const floor = (1e-6 * problem.lightVariance + Number.MIN_VALUE) * solution.frames
  return 0.5 * solution.frames * Math.log((solution.coveredSquares + floor) / (solution.squares + floor)) / problem.light.length
}

export function offsetOf(solution: AlignSolution): number {
  return solution.middleSeconds - (1 + solution.driftPpm * 1e-6) * solution.pivotSeconds
}

export function median(values: ArrayLike<number>): number {
  const sorted = Float64Array.from(values).sort()
  if (sorted.length === 0) return Number.NaN
  const middle = sorted.length >> 1
  return sorted.length % 2 ? sorted[middle] : (sorted[middle - 1] + sorted[middle]) / 2
}
