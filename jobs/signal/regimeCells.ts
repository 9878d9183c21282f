/** Block statistics of a record: mean and standard deviation of equal, non-overlapping cells. */
export interface RegimeCells {
  samplesPerCell: number
  count: number
  mean: Float64Array
  deviation: Float64Array
  /** The cells' absolute mean that a twentieth of them, at most three, exceed: the size of "lit", also in a long dark record. */
  scale: number
}

/**
 * Cut a record into cells and take each one's mean and standard deviation (over n). The samples after the last whole
 * cell belong to none.
 */
export function computeCells(illumination: Float32Array, samplesPerCell: number): RegimeCells {
  const count = Math.floor(illumination.length / samplesPerCell)
  const mean = new Float64Array(count)
  const deviation = new Float64Array(count)
  for (let cell = 0; cell < count; cell++) {
    const base = illumination[cell * samplesPerCell]
    let sum = 0
    let squares = 0
    for (let i = cell * samplesPerCell; i < (cell + 1) * samplesPerCell; i++) {
      const value = illumination[i] - base
      sum += value
      squares += value * value
    }
    const average = sum / samplesPerCell
    mean[cell] = base + average
    deviation[cell] = Math.sqrt(Math.max(0, squares / samplesPerCell - average * average))
  }
  const sorted = mean.map(Math.abs).sort()
  return { samplesPerCell, count, mean, deviation, scale: sorted[Math.max(Math.floor(0.95 * (count - 1)), count - 4)] ?? 0 }
}
