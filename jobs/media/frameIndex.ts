import type { Rational } from './streams'

/** Where each frame of a clip is, and where decoding can begin: what random access needs. */
export interface FrameIndex {
  timeBase: Rational
  /** Presentation time of each frame in ticks of the time base, in display order; edit lists are ignored. */
  ticks: Float64Array
  /** Display numbers of the frames that the container or the parser marks as key frames, ascending. */
  keyFrames: Int32Array
  /**
   * Key frames from which decoding is known to be exact for every frame shown at or after them, ascending. Frames shown
   * before such a frame but stored behind it (an open group of pictures) need the entry before. Empty: no seeking.
   */
  entryFrames: Int32Array
  /** Errors at the first frames after a seek belong to what lies before an entry, so decoding begins one entry early. */
  needsRunUp: boolean
}

const magic = 0x4C534649
const version = 1
const headerBytes = 48

/** The index as bytes, little-endian: magic, version, run-up, counts, time base, then ticks, key frames and entries. */
export function encodeFrameIndex({ timeBase, ticks, keyFrames, entryFrames, needsRunUp }: FrameIndex): Uint8Array {
  const bytes = new Uint8Array(headerBytes + 8 * ticks.length + 4 * (keyFrames.length + entryFrames.length))
  const view = new DataView(bytes.buffer)
  ;[magic, version, Number(needsRunUp), ticks.length, keyFrames.length, entryFrames.length].forEach((value, i) => view.setUint32(4 * i, value, true))
  view.setFloat64(24, timeBase.numerator, true)
  view.setFloat64(32, timeBase.denominator, true)
  let at = headerBytes
  for (const tick of ticks) view.setFloat64((at += 8) - 8, tick, true)
  for (const frame of keyFrames) view.setInt32((at += 4) - 4, frame, true)
  for (const frame of entryFrames) view.setInt32((at += 4) - 4, frame, true)
  return bytes
}

/** @throws RangeError when the bytes are not a whole index */
export function decodeFrameIndex(bytes: Uint8Array): FrameIndex {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  if (bytes.length < headerBytes || view.getUint32(0, true) !== magic || view.getUint32(4, true) !== version) throw new RangeError('These bytes are not a frame index. Inspect the clip again.')
  const [runUp, tickCount, keyCount, entryCount] = [2, 3, 4, 5].map(i => view.getUint32(4 * i, true))
  if (bytes.length !== headerBytes + 8 * tickCount + 4 * (keyCount + entryCount)) throw new RangeError('The frame index is cut off. Inspect the clip again.')
  const keysAt = headerBytes + 8 * tickCount
  return {
    timeBase: { numerator: view.getFloat64(24, true), denominator: view.getFloat64(32, true) },
    ticks: Float64Array.from({ length: tickCount }, (_, i) => view.getFloat64(headerBytes + 8 * i, true)),
    keyFrames: Int32Array.from({ length: keyCount }, (_, i) => view.getInt32(keysAt + 4 * i, true)),
    entryFrames: Int32Array.from({ length: entryCount }, (_, i) => view.getInt32(keysAt + 4 * (keyCount + i), true)),
    needsRunUp: runUp === 1,
  }
}

/** Position of the last value that is not above `limit` in an ascending list; −1 when all are. */
export function lastNotAbove(values: ArrayLike<number>, limit: number): number {
  let low = 0
  let high = values.length
  while (low < high) {
    const middle = (low + high) >> 1
    if (values[middle] <= limit) low = middle + 1
    else high = middle
  }
  return low - 1
}

/** The frame that bears this tick; −1 when none or several do. */
export function frameAtTick({ ticks }: FrameIndex, tick: number): number {
  const frame = lastNotAbove(ticks, tick)
  return frame >= 0 && ticks[frame] === tick && ticks[frame - 1] !== tick ? frame : -1
}
