import type { KnownCodeRange, KnownTransfer } from '../../shared/measurement'

/** Counts of a pixel at nominal white (E = 1): small enough that 65 536 frames fit a uint32 sum. */
export const countsPerWhite = 50_000

/** Luma code → linear light, in whole counts. */
export interface LightTable {
  /** `round(50000·E)` of every code; 2^bitDepth entries. */
  counts: Uint32Array
  /** A pixel at this code or above is taken as clipped: its true light is unknown. */
  clippedFrom: number
  /** A pixel at this code or below gives no light: what lay below black is lost. */
  blackUpTo: number
}

/** Inverse transfers, display signal V (0 black, 1 white) to light E, for V ≥ 0; they go on above 1. */
const linearise: Record<KnownTransfer, (signal: number) => number> = {
  // Rec. ITU-R BT.709-6 item 1.2 gives V = 4.5·L below L = 0.018, V = 1.099·L^0.45 − 0.099 from there on.
  bt709: signal => signal < 4.5 * 0.018 ? signal / 4.5 : ((signal + 0.099) / 1.099) ** (1 / 0.45),
  // IEC 61966-2-1:1999.
  srgb: signal => signal <= 0.04045 ? signal / 12.92 : ((signal + 0.055) / 1.055) ** 2.4,
  gamma22: signal => signal ** 2.2,
  linear: signal => signal,
}

/** Codes of black and nominal white luma (limited: 16 and 235 at 8 bits, times 4 at 10; Rec. ITU-R BT.709-6 item 3.5). */
export function codeLimits(range: KnownCodeRange, bitDepth: number): { black: number, white: number, highest: number } {
  const highest = 2 ** bitDepth - 1
  if (range === 'full') return { black: 0, white: highest, highest }
  const step = 2 ** (bitDepth - 8)
  return { black: 16 * step, white: 235 * step, highest }
}

/**
 * Table from raw luma code to linear light.
 *
 * Codes below black give 0, codes above white are kept (up to about 1.19·white for BT.709 at code 255). `clippedFrom`
 * lies one 8-bit code under the top, because lossy coding spreads a clipped area by about a code; a camera that clips
 * earlier, at nominal white say, needs `clippedFrom` set.
 *
 * @param bitDepth 8 or 10
 * @throws RangeError for another bit depth
 */
export function createLightTable(transfer: KnownTransfer, range: KnownCodeRange, bitDepth: number, clippedFrom?: number): LightTable {
  if (bitDepth !== 8 && bitDepth !== 10) throw new RangeError(`There is no light table for ${bitDepth} bits. Use a clip with 8 or 10 bits.`)
  const { black, white, highest } = codeLimits(range, bitDepth)
  const counts = new Uint32Array(highest + 1)
  for (let code = black; code <= highest; code++) counts[code] = Math.round(countsPerWhite * linearise[transfer]((code - black) / (white - black)))
  return { counts, clippedFrom: clippedFrom ?? highest + 1 - 2 * 2 ** (bitDepth - 8), blackUpTo: black }
}
