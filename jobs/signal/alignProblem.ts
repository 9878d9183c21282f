import type { LightIntegrals } from './lightPrediction'
import type { LampTone } from './lampTones'

/** What every step of the alignment works on. */
export interface AlignProblem {
  /** Measured mean light and clip time of the frames that have one. */
  light: Float64Array
  times: Float64Array
  exposureSeconds: number
  /** Median interval between frames. */
  frameSeconds: number
  integrals: LightIntegrals
  recordSeconds: number
  tones: LampTone[]
  maxDriftPpm: number
  /** Mean square of light about its mean. */
  lightVariance: number
}

/** An alignment in the making; `middleSeconds` is the record time of clip time `pivotSeconds`. */
export interface AlignSolution {
  middleSeconds: number
  pivotSeconds: number
  driftPpm: number
  gain: number
  background: number
  /** Frames whose window lies in the record, and their summed squared error. */
  frames: number
  squares: number
}

export interface LinearFit {
  gain: number
  background: number
  squares: number
}

/** y ≈ gain·w + background from sums; a gain below 0 is refused and leaves the variance. */
export function fitGain(n: number, w: number, ww: number, y: number, yy: number, wy: number): LinearFit {
  const sww = ww - w * w / n
  const syy = Math.max(0, yy - y * y / n)
  const swy = wy - w * y / n
  if (!(sww > 1e-12 * ww) || swy <= 0) return { gain: 0, background: y / n, squares: syy }
  const gain = swy / sww
  return { gain, background: (y - gain * w) / n, squares: Math.max(0, syy - gain * swy) }
}

/**
 * Badness of a solution for comparing different overlaps: squared error in units of the noise, and for every frame that
 * the record does not cover what not knowing it costs (log of spread over noise).
 */
export function badness(problem: AlignProblem, solution: { frames: number, squares: number }, noiseVariance: number): number {
  const unknown = problem.light.length - solution.frames
  return (solution.squares / noiseVariance + unknown * Math.log(Math.max(problem.lightVariance / noiseVariance, 2))) / problem.light.length
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
