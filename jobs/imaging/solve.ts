import type { GroupRole } from '../../shared/measurement'
import { pseudoInverse } from './pseudoInverse'

export interface FrameSetInput {
  /** One image per group, H·W, row-major: Σ of `round(50000·E)` over the group's frames. */
  sums: Uint32Array[]
  roles: readonly GroupRole[]
  /** [G, 3] row-major: A, C, S of each group in record units (times frames). */
  integrals: Float64Array
  /** Frames of each group. */
  frames: ArrayLike<number>
  /** Groups to use; all when left out. */
  accepted?: ArrayLike<number | boolean>
  width: number
  height: number
}

export interface FrameSetSolution {
  /** Scene s, H·W: counts per record unit. */
  scene: Float32Array
  /** p = −∇s·U_r and q = +∇s·U_i, H·W: counts per record unit. */
  p: Float32Array
  q: Float32Array
  /** Ambient light and black level, counts per frame; null without accepted dark groups. */
  ambient: Float32Array | null
  /** Standard deviation of one group's sum, in counts, from the residual; NaN without degrees of freedom. */
  noise: Float32Array
  degreesOfFreedom: number
  /** Of the [A, C, S] rows of the accepted lit groups. */
  conditionNumber: number
  /** [k, k] row-major, k = 3 or 4: covariance of (s, p, q[, ambient]) is noise² times this. */
  covariance: Float64Array
  /** Of each group: rms over the pixels of residual / √(1 − leverage), in counts; NaN where not accepted or no degrees of freedom. */
  residualRms: Float64Array
}

/** The groups do not determine s, p and q. The message says what is missing. */
export class SolveError extends Error {
  override name = 'SolveError'
  constructor(readonly code: 'too-few-groups' | 'ill-conditioned', message: string) {
    super(message)
  }
}

/** Beyond this, p and q are noise: a lamp modulated by less than about a hundredth, or two phases that are nearly one. */
const largestConditionNumber = 1000
const blockPixels = 4096

/**
 * Solve every pixel of a line by least squares with one pseudo-inverse:
 *
 *     I_g = A_g·s + C_g·p + S_g·q [+ N_g·d]
 *
 * The ambient term d is there when dark groups are accepted. All groups weigh the same. I stays in counts of 50000·E and
 * A, C, S in record units, so s, p and q are counts per record unit (displacement needs ratios of them only).
 *
 * @throws SolveError when groups are missing or their integrals do not differ enough; RangeError when sizes disagree
 * Source: the exposure as Fourier integral, written as a linear model with measured coefficients; ordinary least squares.
 */
export function solveFrameSet(input: FrameSetInput): FrameSetSolution {
  const { sums, roles, width, height, accepted } = input
  const pixels = width * height
  if (roles.length !== sums.length || input.frames.length !== sums.length || input.integrals.length !== 3 * sums.length) throw new RangeError('Sums, roles, frames and integrals must be of the same groups.')
  if (sums.some(sum => sum.length !== pixels)) throw new RangeError(`Every sum must have ${width}×${height} pixels.`)
  const used = roles.flatMap((_, g) => accepted === undefined || accepted[g] ? [g] : [])
  const { matrix, columns } = designMatrix(input, used)
  const conditionNumber = assertSolvable(input, used)
  const solved = pseudoInverse(matrix, used.length, columns)
  if (!solved) throw new SolveError('ill-conditioned', 'The groups do not tell scene and ambient light apart. Leave the dark groups out, or add lit groups.')
  const images = Array.from({ length: columns }, () => new Float32Array(pixels))
  const degreesOfFreedom = used.length - columns
  const noise = new Float32Array(pixels)
  const squares = solvePixels(used.map(g => sums[g]), matrix, solved.inverse, images, noise, degreesOfFreedom)
  const residualRms = new Float64Array(sums.length).fill(Number.NaN)
  if (degreesOfFreedom > 0) used.forEach((g, row) => residualRms[g] = Math.sqrt(squares[row] / pixels / (1 - leverage(matrix, solved.inverse, row, columns))))
  return { scene: images[0], p: images[1], q: images[2], ambient: images[3] ?? null, noise, degreesOfFreedom, conditionNumber, covariance: gram(solved.inverse, columns), residualRms }
}

function designMatrix({ roles, integrals, frames }: FrameSetInput, used: number[]): { matrix: Float64Array, columns: number } {
  const columns = used.some(g => roles[g] === 'dark') ? 4 : 3
  const matrix = new Float64Array(used.length * columns)
  used.forEach((g, row) => {
    for (let k = 0; k < 3; k++) matrix[row * columns + k] = integrals[3 * g + k]
    if (columns === 4) matrix[row * columns + 3] = frames[g]
  })
  if (!matrix.every(Number.isFinite)) throw new SolveError('too-few-groups', 'A group’s exposures do not lie wholly within the record. Reject it or cut its frames.')
  return { matrix, columns }
}

/** @returns condition number of the lit groups' [A, C, S] */
function assertSolvable({ roles, integrals }: FrameSetInput, used: number[]): number {
  const lit = used.filter(g => roles[g] !== 'dark')
  const phases = lit.filter(g => roles[g] === 'phase').length
  if (phases < 2 || lit.length < 3) throw new SolveError('too-few-groups', `A line needs a reference and at least two phase groups; ${lit.length - phases} and ${phases} are accepted. Accept more groups or shoot the missing ones.`)
  const rows = Float64Array.from(lit.flatMap(g => [...integrals.subarray(3 * g, 3 * g + 3)]))
  const conditionNumber = pseudoInverse(rows, lit.length, 3)?.conditionNumber ?? Infinity
  if (conditionNumber > largestConditionNumber) throw new SolveError('ill-conditioned', 'The accepted groups do not determine both parts of the motion: their lamp phases are nearly the same, or the lamp was hardly modulated. Accept a group a quarter period away.')
  return conditionNumber
}

/** @returns Σ over the pixels of each group's squared residual */
function solvePixels(sums: Uint32Array[], matrix: Float64Array, inverse: Float64Array, images: Float32Array[], noise: Float32Array, degreesOfFreedom: number): Float64Array {
  const groups = sums.length
  const columns = images.length
  const squares = new Float64Array(groups)
  const block = images.map(() => new Float64Array(blockPixels))
  const variance = new Float64Array(blockPixels)
  for (let from = 0; from < noise.length; from += blockPixels) {
    const length = Math.min(blockPixels, noise.length - from)
    block.forEach(values => values.fill(0))
    variance.fill(0)
    for (let k = 0; k < columns; k++) {
      for (let g = 0; g < groups; g++) addScaled(block[k], sums[g], from, length, inverse[k * groups + g])
      images[k].set(block[k].subarray(0, length), from)
    }
    for (let g = 0; g < groups; g++) squares[g] += addResiduals(variance, sums[g], from, length, block, matrix.subarray(g * columns, (g + 1) * columns))
    for (let i = 0; i < length; i++) noise[from + i] = degreesOfFreedom > 0 ? Math.sqrt(variance[i] / degreesOfFreedom) : Number.NaN
  }
  return squares
}

function addScaled(target: Float64Array, source: Uint32Array, from: number, length: number, factor: number): void {
  for (let i = 0; i < length; i++) target[i] += factor * source[from + i]
}

/** Adds the squared residuals of one group to each pixel's; returns their sum. */
function addResiduals(variance: Float64Array, source: Uint32Array, from: number, length: number, [s, p, q, d]: Float64Array[], row: Float64Array): number {
  const [a, c, b] = row
  const n = d ? row[3] : 0
  const ambient = d ?? s
  let total = 0
  for (let i = 0; i < length; i++) {
    const residual = source[from + i] - a * s[i] - c * p[i] - b * q[i] - n * ambient[i]
    variance[i] += residual * residual
    total += residual * residual
  }
  return total
}

function leverage(matrix: Float64Array, inverse: Float64Array, row: number, columns: number): number {
  const groups = inverse.length / columns
  let sum = 0
  for (let k = 0; k < columns; k++) sum += matrix[row * columns + k] * inverse[k * groups + row]
  // A group that alone fixes a coefficient has leverage 1 and no residual.
  return Math.min(sum, 1 - 1e-9)
}

function gram(inverse: Float64Array, columns: number): Float64Array {
  const groups = inverse.length / columns
  return Float64Array.from({ length: columns * columns }, (_, at) => {
    const [a, b] = [Math.floor(at / columns), at % columns].map(k => inverse.subarray(k * groups, (k + 1) * groups))
    return a.reduce((sum, value, g) => sum + value * b[g], 0)
  })
}
