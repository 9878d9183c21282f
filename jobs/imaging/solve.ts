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
  /** Standard deviation of one lit group's sum, in counts, from the lit groups' residuals; NaN when they leave no freedom. */
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

/** What is known of a line before a pixel is read: the same for every pixel, band and thread. */
export interface SolvePlan {
  /** Indices of the accepted groups, ascending; rows of `matrix`, columns of `inverse`. */
  used: number[]
  /** 3, or 4 with an ambient term. */
  columns: number
  /** [U, columns] row-major: A, C, S[, N]. */
  matrix: Float64Array
  /** [columns, U] row-major. */
  inverse: Float64Array
  degreesOfFreedom: number
  /** Rows of the lit groups, and the freedom that they leave: Σ (1 − leverage). Dark groups scatter far less than lit ones, so they say nothing about their noise. */
  litRows: number[]
  litFreedom: number
  conditionNumber: number
  /** [columns, columns] row-major. */
  covariance: Float64Array
}

/** Images of some neighbouring pixels, all of the same length. */
export interface BandImages {
  scene: Float32Array
  p: Float32Array
  q: Float32Array
  noise: Float32Array
  /** Left out when nobody needs it. */
  ambient?: Float32Array
}

/** Beyond this, p and q are noise: a lamp modulated by less than about a hundredth, or two phases that are nearly one. */
const largestConditionNumber = 1000
/** Less than this is rounding, or what dark groups leave of one repetition. */
const leastFreedom = 0.5
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
  const { sums, roles, width, height } = input
  const pixels = width * height
  if (roles.length !== sums.length) throw new RangeError('Sums, roles, frames and integrals must be of the same groups.')
  if (sums.some(sum => sum.length !== pixels)) throw new RangeError(`Every sum must have ${width}×${height} pixels.`)
  const plan = planSolution(input)
  const image = () => new Float32Array(pixels)
  const images = { scene: image(), p: image(), q: image(), noise: image(), ...plan.columns === 4 ? { ambient: image() } : {} }
  const squares = new Float64Array(plan.used.length)
  solveBand(plan, plan.used.map(g => sums[g]), images, squares)
  return { ...images, ambient: images.ambient ?? null, degreesOfFreedom: plan.degreesOfFreedom, conditionNumber: plan.conditionNumber, covariance: plan.covariance, residualRms: residualRmsOf(plan, squares, pixels, sums.length) }
}

/**
 * The part of the solution that all pixels share.
 *
 * @throws SolveError when groups are missing or their integrals do not differ enough; RangeError when lengths disagree
 */
export function planSolution(input: Omit<FrameSetInput, 'sums' | 'width' | 'height'>): SolvePlan {
  const { roles, accepted } = input
  if (input.frames.length !== roles.length || input.integrals.length !== 3 * roles.length) throw new RangeError('Sums, roles, frames and integrals must be of the same groups.')
  const used = roles.flatMap((_, g) => accepted === undefined || accepted[g] ? [g] : [])
  const { matrix, columns } = designMatrix(input, used)
  const conditionNumber = assertSolvable(input, used)
  const solved = pseudoInverse(matrix, used.length, columns)
  if (!solved) throw new SolveError('ill-conditioned', 'The groups do not tell scene and ambient light apart. Leave the dark groups out, or add lit groups.')
  const litRows = used.flatMap((g, row) => roles[g] === 'dark' ? [] : [row])
  const freedom = litRows.reduce((sum, row) => sum + 1 - leverage(matrix, solved.inverse, row, columns), 0)
  return { used, columns, matrix, inverse: solved.inverse, litRows, litFreedom: freedom < leastFreedom ? 0 : freedom, degreesOfFreedom: used.length - columns, conditionNumber, covariance: gram(solved.inverse, columns) }
}

/** rms over the pixels of each group's residual / √(1 − leverage), from the sums of squares of all bands; NaN where not accepted. */
export function residualRmsOf({ used, matrix, inverse, columns, degreesOfFreedom }: SolvePlan, squares: ArrayLike<number>, pixels: number, groupCount: number): Float64Array {
  const residualRms = new Float64Array(groupCount).fill(Number.NaN)
  if (degreesOfFreedom > 0) used.forEach((g, row) => residualRms[g] = Math.sqrt(squares[row] / pixels / (1 - leverage(matrix, inverse, row, columns))))
  return residualRms
}

function designMatrix({ roles, integrals, frames }: Omit<FrameSetInput, 'sums' | 'width' | 'height'>, used: number[]): { matrix: Float64Array, columns: number } {
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
function assertSolvable({ roles, integrals }: Omit<FrameSetInput, 'sums' | 'width' | 'height'>, used: number[]): number {
  const lit = used.filter(g => roles[g] !== 'dark')
  const phases = lit.filter(g => roles[g] === 'phase').length
  if (phases < 2 || lit.length < 3) throw new SolveError('too-few-groups', `A line needs a reference and at least two phase groups; ${lit.length - phases} and ${phases} are accepted. Accept more groups or shoot the missing ones.`)
  const rows = Float64Array.from(lit.flatMap(g => [...integrals.subarray(3 * g, 3 * g + 3)]))
  const conditionNumber = pseudoInverse(rows, lit.length, 3)?.conditionNumber ?? Infinity
  if (conditionNumber > largestConditionNumber) throw new SolveError('ill-conditioned', 'The accepted groups do not determine both parts of the motion: their lamp phases are nearly the same, or the lamp was hardly modulated. Accept a group a quarter period away.')
  return conditionNumber
}

/**
 * Solve neighbouring pixels. Every pixel stands for itself, so a picture solved in bands, in any order and by any number
 * of threads, has the same bits as one solved at once.
 *
 * @param sums of the plan's used groups, each as long as the images
 * @param images written in place; `noise` becomes NaN when the lit groups leave no freedom
 * @param squares of each used group: Σ over these pixels of its squared residual is added; left out, it is not computed
 */
export function solveBand(plan: SolvePlan, sums: readonly Uint32Array[], images: BandImages, squares?: Float64Array): void {
  const { columns, litRows, litFreedom } = plan
  const pixels = images.noise.length
  const [weights, rows] = [weightsOf(plan), rowsOf(plan)]
  const block = new Float64Array(4 * blockPixels)
  const variance = new Float64Array(blockPixels)
  const targets = [images.scene, images.p, images.q, images.ambient].slice(0, columns)
  for (let from = 0; from < pixels; from += blockPixels) {
    const length = Math.min(blockPixels, pixels - from)
    block.fill(0)
    variance.fill(0)
    for (let g = 0; g < sums.length; g += 2) addPair(block, sums[g], sums[g + 1] ?? sums[g], from, length, weights, 4 * g)
    targets.forEach((image, k) => image?.set(block.subarray(k * blockPixels, k * blockPixels + length), from))
    if (squares) for (let g = 0; g < sums.length; g++) squares[g] += squaredResiduals(sums[g], from, length, block, rows, 4 * g)
    if (litFreedom > 0) for (let k = 0; k < litRows.length; k += 2) addResiduals(variance, sums, litRows[k], litRows[k + 1], from, length, block, rows)
    for (let i = 0; i < length; i++) images.noise[from + i] = litFreedom > 0 ? Math.sqrt(variance[i] / litFreedom) : Number.NaN
  }
}

/** Four weights a group: of s, p, q and the ambient term, 0 without one; a group of zeros ends an odd number. */
function weightsOf({ inverse, columns, used }: SolvePlan): Float64Array {
  const weights = new Float64Array(4 * (used.length + 1))
  for (let g = 0; g < used.length; g++) for (let k = 0; k < columns; k++) weights[4 * g + k] = inverse[k * used.length + g]
  return weights
}

/** Four coefficients a group: A, C, S, N, the last 0 without an ambient term. */
function rowsOf({ matrix, columns, used }: SolvePlan): Float64Array {
  const rows = new Float64Array(4 * (used.length + 1))
  for (let g = 0; g < used.length; g++) for (let k = 0; k < columns; k++) rows[4 * g + k] = matrix[columns * g + k]
  return rows
}

/**
 * Adds two groups' sums, weighted, to the block of four images: each accumulator is read and written once for both. Only
 * typed arrays and numbers come in, so that a fresh thread's compiler is done with it once.
 */
function addPair(block: Float64Array, first: Uint32Array, second: Uint32Array, from: number, length: number, weights: Float64Array, at: number): void {
  const [s1, p1, q1, d1] = [weights[at], weights[at + 1], weights[at + 2], weights[at + 3]]
  const [s2, p2, q2, d2] = [weights[at + 4], weights[at + 5], weights[at + 6], weights[at + 7]]
  for (let i = 0; i < length; i++) {
    const a = first[from + i]
    const b = second[from + i]
    block[i] = block[i] + s1 * a + s2 * b
    block[blockPixels + i] = block[blockPixels + i] + p1 * a + p2 * b
    block[2 * blockPixels + i] = block[2 * blockPixels + i] + q1 * a + q2 * b
    block[3 * blockPixels + i] = block[3 * blockPixels + i] + d1 * a + d2 * b
  }
}

/** Adds the squared residuals of two groups, or of the last one alone, to each pixel's. */
function addResiduals(variance: Float64Array, sums: readonly Uint32Array[], one: number, other: number | undefined, from: number, length: number, block: Float64Array, rows: Float64Array): void {
  if (other === undefined) addResidualPair(variance, sums[one], sums[one], 0, from, length, block, rows, 4 * one, 4 * one)
  else addResidualPair(variance, sums[one], sums[other], 1, from, length, block, rows, 4 * one, 4 * other)
}

function addResidualPair(variance: Float64Array, first: Uint32Array, second: Uint32Array, paired: number, from: number, length: number, block: Float64Array, rows: Float64Array, at: number, to: number): void {
  const [a1, c1, s1, n1] = [rows[at], rows[at + 1], rows[at + 2], rows[at + 3]]
  const [a2, c2, s2, n2] = [rows[to], rows[to + 1], rows[to + 2], rows[to + 3]]
  for (let i = 0; i < length; i++) {
    const s = block[i]
    const p = block[blockPixels + i]
    const q = block[2 * blockPixels + i]
    const d = block[3 * blockPixels + i]
    const one = first[from + i] - a1 * s - c1 * p - s1 * q - n1 * d
    const other = paired * (second[from + i] - a2 * s - c2 * p - s2 * q - n2 * d)
    variance[i] = variance[i] + one * one + other * other
  }
}

function squaredResiduals(source: Uint32Array, from: number, length: number, block: Float64Array, rows: Float64Array, at: number): number {
  const [a, c, b, n] = [rows[at], rows[at + 1], rows[at + 2], rows[at + 3]]
  let total = 0
  for (let i = 0; i < length; i++) {
    const residual = source[from + i] - a * block[i] - c * block[blockPixels + i] - b * block[2 * blockPixels + i] - n * block[3 * blockPixels + i]
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
