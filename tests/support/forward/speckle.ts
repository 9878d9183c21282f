import { gaussianRandom, seededRandom } from './random'

/** A picture as a formula: value at any point, pixel centres at whole coordinates, x right, y down. */
export type Picture = (x: number, y: number) => number

/** Spots are cut off where they have fallen below 4·10⁻⁶ of their peak. */
const reachInBlurs = 5
const cellInBlurs = 2

/**
 * Random speckle of mean 0 and variance 1: one Gaussian spot of standard deviation `blurPixels` in each cell of a
 * grid, somewhere in its cell, with a random height. A sum of Gaussians, so it is known exactly between pixels.
 */
export function makeSpeckle(seed: number, blurPixels: number, width: number, height: number): Picture {
  const cell = cellInBlurs * blurPixels
  const reach = reachInBlurs * blurPixels
  const margin = Math.ceil(reach / cell) + 2
  const columns = Math.ceil(width / cell) + 2 * margin
  const rows = Math.ceil(height / cell) + 2 * margin
  const uniform = seededRandom(seed)
  const normal = gaussianRandom(seed + 1)
  const spots = new Float64Array(columns * rows * 3)
  const norm = cell / (blurPixels * Math.sqrt(Math.PI))
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      const at = 3 * (row * columns + column)
      spots[at] = (column - margin + uniform()) * cell
      spots[at + 1] = (row - margin + uniform()) * cell
      spots[at + 2] = normal() * norm
    }
  }
  return sumOfSpots(spots, columns, rows, cell, margin, reach, blurPixels)
}

function sumOfSpots(spots: Float64Array, columns: number, rows: number, cell: number, margin: number, reach: number, blurPixels: number): Picture {
  const reachSquared = reach * reach
  const exponent = -1 / (2 * blurPixels * blurPixels)
  return (x, y) => {
    const firstRow = Math.max(0, Math.floor((y - reach) / cell) + margin)
    const lastRow = Math.min(rows - 1, Math.floor((y + reach) / cell) + margin)
    const firstColumn = Math.max(0, Math.floor((x - reach) / cell) + margin)
    const lastColumn = Math.min(columns - 1, Math.floor((x + reach) / cell) + margin)
    let sum = 0
    for (let row = firstRow; row <= lastRow; row++) {
      for (let at = 3 * (row * columns + firstColumn), end = 3 * (row * columns + lastColumn); at <= end; at += 3) {
        const dx = x - spots[at]!
        const dy = y - spots[at + 1]!
        const squared = dx * dx + dy * dy
        if (squared < reachSquared) sum += spots[at + 2]! * Math.exp(squared * exponent)
      }
    }
    return sum
  }
}
