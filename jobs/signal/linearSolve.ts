/**
 * Solve a small dense system `A x = b` by Gaussian elimination with row pivoting.
 *
 * @param matrix row-major n × n; left untouched
 * @param right n values; left untouched
 * @returns x, or null when the matrix is singular to about 13 digits relative to its largest element of the column
 */
export function solveLinear(matrix: ArrayLike<number>, right: ArrayLike<number>): Float64Array | null {
  const n = right.length
  const a = Float64Array.from(matrix)
  const x = Float64Array.from(right)
  const columnScale = new Float64Array(n)
  for (let row = 0; row < n; row++) {
    for (let column = 0; column < n; column++) columnScale[column] = Math.max(columnScale[column], Math.abs(a[row * n + column]))
  }
  for (let column = 0; column < n; column++) {
    let pivot = column
    for (let row = column + 1; row < n; row++) {
      if (Math.abs(a[row * n + column]) > Math.abs(a[pivot * n + column])) pivot = row
    }
    if (!(Math.abs(a[pivot * n + column]) > 1e-13 * columnScale[column])) return null
    if (pivot !== column) swapRows(a, x, n, pivot, column)
    for (let row = column + 1; row < n; row++) {
      const factor = a[row * n + column] / a[column * n + column]
      if (factor === 0) continue
      for (let k = column; k < n; k++) a[row * n + k] -= factor * a[column * n + k]
      x[row] -= factor * x[column]
    }
  }
  for (let row = n - 1; row >= 0; row--) {
    for (let k = row + 1; k < n; k++) x[row] -= a[row * n + k] * x[k]
    x[row] /= a[row * n + row]
  }
  return x
}

function swapRows(a: Float64Array, x: Float64Array, n: number, first: number, second: number): void {
  for (let k = 0; k < n; k++) {
    const kept = a[first * n + k]
    a[first * n + k] = a[second * n + k]
    a[second * n + k] = kept
  }
  const kept = x[first]
  x[first] = x[second]
  x[second] = kept
}

/** Inverse of a small dense matrix, row-major; null when singular (see `solveLinear`). */
export function invert(matrix: ArrayLike<number>, n: number): Float64Array | null {
  const inverse = new Float64Array(n * n)
  const unit = new Float64Array(n)
  for (let column = 0; column < n; column++) {
    unit.fill(0)
    unit[column] = 1
    const solution = solveLinear(matrix, unit)
    if (!solution) return null
    for (let row = 0; row < n; row++) inverse[row * n + column] = solution[row]
  }
  return inverse
}
