import type { LightTable } from '../media/transfer'

export type Luma = Uint8Array | Uint16Array

/** Pixels, first row and column at 0. */
export interface Rectangle {
  left: number
  top: number
  width: number
  height: number
}

export interface FrameMeter {
  /** Σ of the table over the pixels: an exact whole number. Mean linear light is counts / pixels / `countsPerWhite`. */
  counts: number
  pixels: number
  /** Pixels at the top of the range, whose light is unknown. */
  clipped: number
  /** Pixels at black or below. */
  black: number
}

/** More frames could overflow a uint32 sum (the largest table value is about 61 500). */
export const maximumFramesPerSum = 65_536

/** @throws RangeError when so many frames cannot be added exactly */
export function assertSummable(frameCount: number): void {
  if (frameCount > maximumFramesPerSum) throw new RangeError(`A group of ${frameCount} frames is too long to be added exactly. Split it into groups of at most ${maximumFramesPerSum} frames.`)
}

/**
 * Add one frame's linear light to a sum, exactly: sum[i] += counts[luma[i]].
 *
 * @param sum H·W counts, row-major; changed in place. The caller keeps to `maximumFramesPerSum` frames.
 * @param luma H·W raw luma codes
 */
export function addFrame(sum: Uint32Array, luma: Luma, table: LightTable): void {
  if (luma.length !== sum.length) throw new RangeError(`A frame of ${luma.length} pixels does not fit a sum of ${sum.length}.`)
  if (luma instanceof Uint8Array) addBytes(sum, luma, table.counts)
  else addWords(sum, luma, table.counts)
}

// One loop per element type: a loop that meets both types runs several times slower.
function addBytes(sum: Uint32Array, luma: Uint8Array, counts: Uint32Array): void {
  for (let i = 0; i < luma.length; i++) sum[i] += counts[luma[i]]
}

function addWords(sum: Uint32Array, luma: Uint16Array, counts: Uint32Array): void {
  for (let i = 0; i < luma.length; i++) sum[i] += counts[luma[i]]
}

/**
 * Measure the light of one frame, or of a rectangle in it.
 *
 * Counted through a histogram of codes, so the result is exact and costs one pass.
 *
 * @param luma H·W raw luma codes, row-major
 * @param area rectangle within a frame of `frameWidth` columns; the whole frame when left out
 * @throws RangeError when the rectangle does not lie within the frame
 */
export function meterFrame(luma: Luma, table: LightTable, area?: { rectangle: Rectangle, frameWidth: number }): FrameMeter {
  const histogram = new Uint32Array(table.counts.length)
  if (area) {
    const { rectangle: { left, top, width, height }, frameWidth } = area
    if (left < 0 || top < 0 || width < 1 || height < 1 || left + width > frameWidth || (top + height) * frameWidth > luma.length) throw new RangeError('The lamp patch does not lie within the picture. Draw it again.')
    for (let row = top; row < top + height; row++) countCodes(histogram, luma, row * frameWidth + left, row * frameWidth + left + width)
  } else {
    countCodes(histogram, luma, 0, luma.length)
  }
  return meterHistogram(histogram, table)
}

function countCodes(histogram: Uint32Array, luma: Luma, from: number, to: number): void {
  if (luma instanceof Uint8Array) countBytes(histogram, luma, from, to)
  else countWords(histogram, luma, from, to)
}

function countBytes(histogram: Uint32Array, luma: Uint8Array, from: number, to: number): void {
  for (let i = from; i < to; i++) histogram[luma[i]]++
}

function countWords(histogram: Uint32Array, luma: Uint16Array, from: number, to: number): void {
  for (let i = from; i < to; i++) histogram[luma[i]]++
}

/** Light, clipped and black pixels of a histogram of codes (one count per code of the table). */
export function meterHistogram(histogram: ArrayLike<number>, table: LightTable): FrameMeter {
  const meter: FrameMeter = { counts: 0, pixels: 0, clipped: 0, black: 0 }
  for (let code = 0; code < table.counts.length; code++) {
    const pixels = histogram[code]
    meter.counts += pixels * table.counts[code]
    meter.pixels += pixels
    if (code >= table.clippedFrom) meter.clipped += pixels
    if (code <= table.blackUpTo) meter.black += pixels
  }
  return meter
}
