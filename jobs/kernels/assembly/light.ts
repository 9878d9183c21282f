/**
 * AssemblyScript, not TypeScript: compiled by `npm run kernels` into ../light.wasm.ts.
 * Addresses are bytes in the imported memory. `lightKernel.ts` is the only caller.
 */

/** A u32 half of a packed total holds this many table values of 16 bits. */
const pixelsPerBlock: usize = 32768

// @ts-ignore: decorator
@inline
function entry<T>(table: usize, frame: usize, i: usize): u64 {
  // Ten bits at most: a code that is none must not read beyond the table.
  const code = sizeof<T>() == 1 ? <usize>load<T>(frame + i) : <usize>load<T>(frame + (i << 1)) & 1023
  return load<u64>(table + (code << 3))
}

/**
 * sum[i] += Σ_k light[frame_k[i]] over eight frames, and the light of each frame as u64 at `totals`.
 *
 * Two frames share a 64-bit addition: `low` holds the light of a code in the lower half of a u64, `high` in the upper.
 */
// @ts-ignore: decorator
@inline
function addEight<T>(sum: usize, frames: usize, stride: usize, pixels: usize, low: usize, high: usize, totals: usize): void {
  const f1 = frames + stride, f2 = f1 + stride, f3 = f2 + stride, f4 = f3 + stride, f5 = f4 + stride, f6 = f5 + stride, f7 = f6 + stride
  for (let k: usize = 0; k < 64; k += 8) store<u64>(totals + k, 0)
  for (let at: usize = 0; at < pixels; at += pixelsPerBlock) {
    const end = min(at + pixelsPerBlock, pixels)
    let t01: u64 = 0, t23: u64 = 0, t45: u64 = 0, t67: u64 = 0
    for (let i = at; i < end; i++) {
      const a = entry<T>(low, frames, i) + entry<T>(high, f1, i)
      const b = entry<T>(low, f2, i) + entry<T>(high, f3, i)
      const c = entry<T>(low, f4, i) + entry<T>(high, f5, i)
      const d = entry<T>(low, f6, i) + entry<T>(high, f7, i)
      t01 += a
      t23 += b
      t45 += c
      t67 += d
      const all = a + b + c + d
      const pixel = sum + (i << 2)
      store<u32>(pixel, load<u32>(pixel) + <u32>all + <u32>(all >> 32))
    }
    keep(totals, t01)
    keep(totals + 16, t23)
    keep(totals + 32, t45)
    keep(totals + 48, t67)
  }
}

// @ts-ignore: decorator
@inline
function keep(totals: usize, packed: u64): void {
  store<u64>(totals, load<u64>(totals) + (packed & 0xffffffff))
  store<u64>(totals, load<u64>(totals, 8) + (packed >> 32), 8)
}

/** sum[i] += light[frame[i]] modulo 2³², so that a table of negated values takes a frame out again. */
// @ts-ignore: decorator
@inline
function addOne<T>(sum: usize, frame: usize, pixels: usize, low: usize, totals: usize): void {
  let total: u64 = 0
  for (let i: usize = 0; i < pixels; i++) {
    const light = entry<T>(low, frame, i)
    total += light
    const pixel = sum + (i << 2)
    store<u32>(pixel, load<u32>(pixel) + <u32>light)
  }
  store<u64>(totals, total)
}

export function addEightBytes(sum: usize, frames: usize, stride: usize, pixels: usize, low: usize, high: usize, totals: usize): void {
  addEight<u8>(sum, frames, stride, pixels, low, high, totals)
}

export function addEightWords(sum: usize, frames: usize, stride: usize, pixels: usize, low: usize, high: usize, totals: usize): void {
  addEight<u16>(sum, frames, stride, pixels, low, high, totals)
}

export function addOneByte(sum: usize, frame: usize, pixels: usize, low: usize, totals: usize): void {
  addOne<u8>(sum, frame, pixels, low, totals)
}

export function addOneWord(sum: usize, frame: usize, pixels: usize, low: usize, totals: usize): void {
  addOne<u16>(sum, frame, pixels, low, totals)
}

/** Pixels at `clippedFrom` or above, and at `blackUpTo` or below: two u32 at `counts`. */
export function countExtremeBytes(frame: usize, pixels: usize, clippedFrom: u32, blackUpTo: u32, counts: usize): void {
  const high = i8x16.splat(<i8>clippedFrom)
  const low = i8x16.splat(<i8>blackUpTo)
  const whole = pixels & ~15
  let clipped: u32 = 0
  let black: u32 = 0
  let i: usize = 0
  while (i < whole) {
    // A byte lane counts to 255.
    const end = min(whole, i + 16 * 255)
    let c = i8x16.splat(0)
    let b = i8x16.splat(0)
    for (; i < end; i += 16) {
      const codes = v128.load(frame + i)
      c = i8x16.sub(c, i8x16.ge_u(codes, high))
      b = i8x16.sub(b, i8x16.le_u(codes, low))
    }
    clipped += sumLanes(i16x8.extadd_pairwise_i8x16_u(c))
    black += sumLanes(i16x8.extadd_pairwise_i8x16_u(b))
  }
  finishCounting<u8>(frame, i, pixels, clippedFrom, blackUpTo, clipped, black, counts)
}

export function countExtremeWords(frame: usize, pixels: usize, clippedFrom: u32, blackUpTo: u32, counts: usize): void {
  const high = i16x8.splat(<i16>clippedFrom)
  const low = i16x8.splat(<i16>blackUpTo)
  const whole = pixels & ~7
  let clipped: u32 = 0
  let black: u32 = 0
  let i: usize = 0
  while (i < whole) {
    const end = min(whole, i + 8 * 65535)
    let c = i16x8.splat(0)
    let b = i16x8.splat(0)
    for (; i < end; i += 8) {
      const codes = v128.load(frame + (i << 1))
      c = i16x8.sub(c, i16x8.ge_u(codes, high))
      b = i16x8.sub(b, i16x8.le_u(codes, low))
    }
    clipped += sumLanes(c)
    black += sumLanes(b)
  }
  finishCounting<u16>(frame, i, pixels, clippedFrom, blackUpTo, clipped, black, counts)
}

/** The pixels that fill no whole vector, and the result. */
// @ts-ignore: decorator
@inline
function finishCounting<T>(frame: usize, from: usize, pixels: usize, clippedFrom: u32, blackUpTo: u32, clipped: u32, black: u32, counts: usize): void {
  for (let i = from; i < pixels; i++) {
    const code = <u32>load<T>(frame + i * sizeof<T>())
    clipped += <u32>(code >= clippedFrom)
    black += <u32>(code <= blackUpTo)
  }
  store<u32>(counts, clipped)
  store<u32>(counts, black, 4)
}

// @ts-ignore: decorator
@inline
function sumLanes(lanes: v128): u32 {
  const pairs = i32x4.extadd_pairwise_i16x8_u(lanes)
  return <u32>(i32x4.extract_lane(pairs, 0) + i32x4.extract_lane(pairs, 1) + i32x4.extract_lane(pairs, 2) + i32x4.extract_lane(pairs, 3))
}
