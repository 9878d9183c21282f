import type { Complex } from './complex'

/**
 * One part of a mode-like field: amplitude·cos(π(halfWavesX·X + shiftX))·cos(π(halfWavesY·Y + shiftY)) with X, Y from
 * 0 to 1 across the image. With no half waves and no shifts it is the same everywhere.
 */
export interface ModeTerm {
  /** Complex amplitudes in pixels, x to the right, y down: u(t) = Re{U e^{jωt}}. */
  ux: Complex
  uy: Complex
  halfWavesX?: number
  halfWavesY?: number
  shiftX?: number
  shiftY?: number
}

/** Complex motion U(x) of every pixel, row-major, in pixels. */
export interface FieldArrays {
  uxReal: Float64Array
  uxImaginary: Float64Array
  uyReal: Float64Array
  uyImaginary: Float64Array
}

function shapeAt(term: ModeTerm, x: number, y: number): number {
  const { halfWavesX = 0, halfWavesY = 0, shiftX = 0, shiftY = 0 } = term
  return Math.cos(Math.PI * (halfWavesX * x + shiftX)) * Math.cos(Math.PI * (halfWavesY * y + shiftY))
}

/** U at one point; x and y in pixels. */
export function fieldAt(terms: ModeTerm[], x: number, y: number, width: number, height: number): { ux: Complex, uy: Complex } {
  const sum = [0, 0, 0, 0]
  for (const term of terms) {
    const shape = shapeAt(term, x / width, y / height)
    sum[0]! += term.ux[0] * shape
    sum[1]! += term.ux[1] * shape
    sum[2]! += term.uy[0] * shape
    sum[3]! += term.uy[1] * shape
  }
  return { ux: [sum[0]!, sum[1]!], uy: [sum[2]!, sum[3]!] }
}

/** U at every pixel of a camera whose image is shifted by (dx, dy). */
export function fieldArrays(terms: ModeTerm[], width: number, height: number, dx = 0, dy = 0): FieldArrays {
  const make = () => new Float64Array(width * height)
  const arrays = { uxReal: make(), uxImaginary: make(), uyReal: make(), uyImaginary: make() }
  for (let row = 0, at = 0; row < height; row++) {
    for (let column = 0; column < width; column++, at++) {
      const { ux, uy } = fieldAt(terms, column - dx, row - dy, width, height)
      arrays.uxReal[at] = ux[0]
      arrays.uxImaginary[at] = ux[1]
      arrays.uyReal[at] = uy[0]
      arrays.uyImaginary[at] = uy[1]
    }
  }
  return arrays
}
