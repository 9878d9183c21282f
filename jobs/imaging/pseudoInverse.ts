export interface PseudoInverse {
  /** n × m, row-major. */
  inverse: Float64Array
  /** Singular values of the matrix as given, descending. */
  singularValues: Float64Array
  /** Largest over smallest singular value of the matrix as given; Infinity when the smallest is 0. */
  conditionNumber: number
  /** Largest over smallest singular value after every column has been scaled to unit length. */
  scaledConditionNumber: number
}

const sweeps = 60
const orthogonal = 1e-15

/**
 * Moore–Penrose inverse of a small dense matrix with at least as many rows as columns.
 *
 * Columns are scaled to unit length first, so that columns in different units do not cost digits. Singular values by
 * one-sided Jacobi rotations (Hestenes 1958).
 *
 * @param matrix m × n, row-major, m ≥ n; left untouched
 * @returns null when the scaled matrix is singular to about 12 digits
 */
export function pseudoInverse(matrix: ArrayLike<number>, m: number, n: number): PseudoInverse | null {
  const plain = singularValueDecomposition(columnsOf(matrix, m, n))
  const columns = columnsOf(matrix, m, n)
  const lengths = columns.map(column => Math.sqrt(dot(column, column)))
  if (m < n || lengths.some(length => !(length > 0))) return null
  columns.forEach((column, k) => column.forEach((value, i) => column[i] = value / lengths[k]))
  const { u, values, v } = singularValueDecomposition(columns)
  const largest = Math.max(...values)
  const smallest = Math.min(...values)
  if (!(smallest > 1e-12 * largest)) return null
  const inverse = new Float64Array(n * m)
  for (let row = 0; row < n; row++) {
    for (let k = 0; k < n; k++) {
      const factor = v[k][row] / (values[k] * values[k] * lengths[row])
      for (let i = 0; i < m; i++) inverse[row * m + i] += factor * u[k][i]
    }
  }
  const singularValues = Float64Array.from(plain.values).sort().reverse()
  return { inverse, singularValues, conditionNumber: singularValues[0] / singularValues[n - 1], scaledConditionNumber: largest / smallest }
}

const columnsOf = (matrix: ArrayLike<number>, m: number, n: number) => Array.from({ length: n }, (_, column) => Float64Array.from({ length: m }, (_, row) => matrix[row * n + column]))

/** Rotates the columns until they are orthogonal: u[k] = value[k] × left vector, v[k] the right vector. */
function singularValueDecomposition(u: Float64Array[]): { u: Float64Array[], values: number[], v: Float64Array[] } {
  const n = u.length
  const v = Array.from({ length: n }, (_, k) => Float64Array.from({ length: n }, (_, row) => row === k ? 1 : 0))
  for (let sweep = 0; sweep < sweeps; sweep++) {
    let turned = false
    for (let a = 0; a < n - 1; a++) {
      for (let b = a + 1; b < n; b++) {
        const alpha = dot(u[a], u[a])
        const beta = dot(u[b], u[b])
        const gamma = dot(u[a], u[b])
        if (Math.abs(gamma) <= orthogonal * Math.sqrt(alpha * beta)) continue
        turned = true
        const zeta = (beta - alpha) / (2 * gamma)
        const tangent = (zeta >= 0 ? 1 : -1) / (Math.abs(zeta) + Math.hypot(1, zeta))
        const cosine = 1 / Math.hypot(1, tangent)
        rotate(u[a], u[b], cosine, cosine * tangent)
        rotate(v[a], v[b], cosine, cosine * tangent)
      }
    }
    if (!turned) break
  }
  return { u, values: u.map(column => Math.sqrt(dot(column, column))), v }
}

function rotate(a: Float64Array, b: Float64Array, cosine: number, sine: number): void {
  for (let i = 0; i < a.length; i++) {
    const kept = a[i]
    a[i] = cosine * kept - sine * b[i]
    b[i] = sine * kept + cosine * b[i]
  }
}

const dot = (a: Float64Array, b: Float64Array) => a.reduce((sum, value, i) => sum + value * b[i], 0)
