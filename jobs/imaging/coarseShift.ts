import type { Rectangle } from './accumulate'

/** Enough for a clear maximum, few enough for hundreds of trial shifts. */
const samples = 12_000

/**
 * Whole-pixel shift of b against a with the largest normalised correlation, over a regular lattice of pixels.
 *
 * @returns dx, dy such that b(x + dx, y + dy) matches a(x, y)
 */
export function coarseShift(a: ArrayLike<number>, b: ArrayLike<number>, width: number, tiles: readonly Rectangle[], searchPixels: number): { dx: number, dy: number } {
  const places = samplePlaces(width, tiles)
  const values = Float64Array.from(places, place => a[place])
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length
  values.forEach((value, i) => values[i] = value - mean)
  let best = { dx: 0, dy: 0 }
  let highest = -Infinity
  for (let dy = -searchPixels; dy <= searchPixels; dy++) {
    for (let dx = -searchPixels; dx <= searchPixels; dx++) {
      const value = correlationAt(values, b, places, dy * width + dx)
      if (value > highest) {
        highest = value
        best = { dx, dy }
      }
    }
  }
  return best
}

/** Runs of 16 neighbours, spread evenly: fine texture is seen whole, and so are all parts of the picture. */
function samplePlaces(width: number, tiles: readonly Rectangle[]): Int32Array {
  const run = 16
  const rows = tiles.flatMap(({ left, top, width: columns, height }) => Array.from({ length: height }, (_, row) => ({ start: (top + row) * width + left, columns })))
  const runsPerRow = Math.max(1, Math.ceil(samples / run / rows.length))
  const everyRow = Math.max(1, Math.floor(rows.length * runsPerRow * run / samples))
  const places: number[] = []
  rows.forEach(({ start, columns }, index) => {
    if (index % everyRow) return
    for (let k = 0; k < runsPerRow; k++) {
      // The golden ratio spreads the starts over the row without a pattern.
      const at = Math.floor(((index * runsPerRow + k) * 0.6180339887 % 1) * Math.max(1, columns - run))
      for (let i = 0; i < Math.min(run, columns); i++) places.push(start + at + i)
    }
  })
  return Int32Array.from(places)
}

function correlationAt(values: Float64Array, b: ArrayLike<number>, places: Int32Array, shift: number): number {
  let sum = 0
  let squares = 0
  let product = 0
  for (let i = 0; i < places.length; i++) {
    const value = b[places[i] + shift]
    sum += value
    squares += value * value
    product += value * values[i]
  }
  const variance = squares - sum * sum / places.length
  return variance > 0 ? product / Math.sqrt(variance) : -Infinity
}
