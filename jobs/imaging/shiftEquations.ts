import type { Rectangle } from './accumulate'
import { interpolatedTile } from './interpolatedTile'

/** Matched 7-tap prefilter and derivative (Farid & Simoncelli 2004, table for first order), for correlation from left to right. */
const prefilter = [0.004711, 0.069321, 0.245410, 0.361117, 0.245410, 0.069321, 0.004711]
const derivative = [-0.018708, -0.125376, -0.193091, 0, 0.193091, 0.125376, 0.018708]
const reach = 3

export interface ShiftEquations {
  /** 4 × 4: step in x, step in y, gain, offset. */
  matrix: Float64Array
  right: Float64Array
  correlation: number
}

/**
 * Normal equations of one Gauss–Newton step: with a moved by half the shift and b back by the other half,
 * b − a = −g_x·δx − g_y·δy + gain·m + offset, m their mean and g its gradient.
 */
export function shiftEquations(a: ArrayLike<number>, b: ArrayLike<number>, width: number, tiles: readonly Rectangle[], dx: number, dy: number): ShiftEquations {
  const unit = meanOf(a, width, tiles[0])
  const matrix = new Float64Array(16)
  const right = new Float64Array(4)
  const moments = new Float64Array(6)
  for (const tile of tiles) {
    const grown = { left: tile.left - reach, top: tile.top - reach, width: tile.width + 2 * reach, height: tile.height + 2 * reach }
    const first = interpolatedTile(a, width, grown, -dx / 2, -dy / 2, 1 / unit)
    const second = interpolatedTile(b, width, grown, dx / 2, dy / 2, 1 / unit)
    addMoments(moments, first, second)
    const mean = first.map((value, i) => (value + second[i]) / 2)
    const difference = first.map((value, i) => second[i] - value)
    addTile(matrix, right, {
      gx: filter(mean, grown, derivative, prefilter), gy: filter(mean, grown, prefilter, derivative),
      m: filter(mean, grown, prefilter, prefilter), d: filter(difference, grown, prefilter, prefilter),
    })
  }
  for (let row = 0; row < 4; row++) for (let column = 0; column < row; column++) matrix[row * 4 + column] = matrix[column * 4 + row]
  return { matrix, right, correlation: correlationOf(moments) }
}

function meanOf(picture: ArrayLike<number>, width: number, { left, top, width: columns, height }: Rectangle): number {
  let sum = 0
  for (let row = top; row < top + height; row++) for (let column = left; column < left + columns; column++) sum += picture[row * width + column]
  return sum / (columns * height) || 1
}

/** Separable correlation; the result is smaller by `reach` on every side. */
function filter(picture: Float32Array, { width, height }: Rectangle, alongX: number[], alongY: number[]): Float32Array {
  const columns = width - 2 * reach
  const rows = height - 2 * reach
  const between = new Float32Array(columns * height)
  for (let row = 0; row < height; row++) {
    for (let column = 0; column < columns; column++) {
      let sum = 0
      for (let k = 0; k < 7; k++) sum += alongX[k] * picture[row * width + column + k]
      between[row * columns + column] = sum
    }
  }
  const result = new Float32Array(columns * rows)
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      let sum = 0
      for (let k = 0; k < 7; k++) sum += alongY[k] * between[(row + k) * columns + column]
      result[row * columns + column] = sum
    }
  }
  return result
}

function addTile(matrix: Float64Array, right: Float64Array, { gx, gy, m, d }: Record<'gx' | 'gy' | 'm' | 'd', Float32Array>): void {
  for (let i = 0; i < d.length; i++) {
    const x = -gx[i]
    const y = -gy[i]
    matrix[0] += x * x
    matrix[1] += x * y
    matrix[2] += x * m[i]
    matrix[3] += x
    matrix[5] += y * y
    matrix[6] += y * m[i]
    matrix[7] += y
    matrix[10] += m[i] * m[i]
    matrix[11] += m[i]
    right[0] += x * d[i]
    right[1] += y * d[i]
    right[2] += m[i] * d[i]
    right[3] += d[i]
  }
  matrix[15] += d.length
}

function addMoments(moments: Float64Array, a: Float32Array, b: Float32Array): void {
  for (let i = 0; i < a.length; i++) {
    moments[0] += a[i]
    moments[1] += b[i]
    moments[2] += a[i] * a[i]
    moments[3] += b[i] * b[i]
    moments[4] += a[i] * b[i]
  }
  moments[5] += a.length
}

function correlationOf([a, b, aa, bb, ab, n]: Float64Array): number {
  return (ab - a * b / n) / Math.sqrt((aa - a * a / n) * (bb - b * b / n))
}
