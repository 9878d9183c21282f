import { solveLinear } from '../signal/linearSolve'
import type { Rectangle } from './accumulate'
import { coarseShift } from './coarseShift'
import { shiftEquations } from './shiftEquations'
import { registrationTiles } from './registrationTiles'

export interface Shift {
  /** Pixels by which the content of b lies to the right of that of a. */
  dx: number
  /** Pixels by which the content of b lies below that of a. */
  dy: number
  /** Whether the steps became small; false when the pictures do not match or lack texture in some direction. */
  converged: boolean
  iterations: number
  /** Correlation of the two pictures after registration, −1…1. */
  correlation: number
}

const largestIterations = 20
/** Pictures that correlate so well when registered have found each other. */
const surelyTheSame = 0.9
const enough = 5e-4
/** Smallest over largest eigenvalue of the gradients' sum of squares, below which one direction has no texture. */
const leastTexture = 1e-4

/**
 * Sub-pixel translation between two pictures of the same scene: b(x, y) ≈ gain·a(x − dx, y − dy) + offset.
 *
 * A start at no shift or, where that does not settle it, at whole pixels by normalised correlation, then Gauss–Newton on the brightness difference (Lucas & Kanade 1981),
 * both pictures moved half-way towards each other so that interpolation acts on both alike, with the matched 7-tap
 * prefilter and derivative of Farid & Simoncelli (2004). Gain and offset are fitted along. Large pictures are read in up
 * to nine tiles. Good to 0.01 px for textured pictures and shifts up to `searchPixels`; border pixels are not used.
 *
 * @param a, b H·W, row-major, any linear unit
 * @param searchPixels largest shift looked for along x and along y
 * @returns dx right, dy down; NaN when the pictures have no texture across some direction
 */
export function estimateShift(a: ArrayLike<number>, b: ArrayLike<number>, width: number, height: number, { searchPixels = 12 }: { searchPixels?: number } = {}): Shift {
  if (a.length !== width * height || b.length !== width * height) throw new RangeError(`Both pictures must have ${width}×${height} pixels.`)
  const tiles = registrationTiles(width, height, searchPixels)
  // Nearly always nothing has moved: the search for whole pixels is worth its time only when that start leads nowhere.
  const near = refineShift(a, b, width, tiles, searchPixels, { dx: 0, dy: 0 })
  if (near.converged && near.correlation >= surelyTheSame && Math.hypot(near.dx, near.dy) <= 1) return near
  return refineShift(a, b, width, tiles, searchPixels, coarseShift(a, b, width, tiles, searchPixels))
}

function refineShift(a: ArrayLike<number>, b: ArrayLike<number>, width: number, tiles: readonly Rectangle[], searchPixels: number, start: { dx: number, dy: number }): Shift {
  let { dx, dy } = start
  let iterations = 0
  let correlation = Number.NaN
  for (; iterations < largestIterations; iterations++) {
    const equations = shiftEquations(a, b, width, tiles, dx, dy)
    correlation = equations.correlation
    const step = hasTexture(equations.matrix) ? solveLinear(equations.matrix, equations.right) : null
    if (!step) return { dx: Number.NaN, dy: Number.NaN, converged: false, iterations, correlation }
    dx += step[0]
    dy += step[1]
    if (Math.abs(dx) > searchPixels + 1 || Math.abs(dy) > searchPixels + 1) break
    if (Math.hypot(step[0], step[1]) < enough) return { dx, dy, converged: true, iterations: iterations + 1, correlation }
  }
  return { dx, dy, converged: false, iterations, correlation }
}

/** @param matrix normal equations whose upper left 2 × 2 is Σ∇∇ᵀ */
function hasTexture(matrix: Float64Array): boolean {
  const [xx, xy, yy] = [matrix[0], matrix[1], matrix[5]]
  const middle = (xx + yy) / 2
  const half = Math.hypot((xx - yy) / 2, xy)
  return middle - half > leastTexture * (middle + half)
}
