import { newline, space } from './asciiBytes'
import { scanNumber } from './numberScan'
import { chunksOf, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import type { UffDataset } from './uffScan'

const single = 13
const double = 20

/**
 * The numbers of an ASCII data block, in order, in blocks. Numbers are split by blanks; a line where they touch is split
 * by its columns.
 *
 * @throws RecordError `not-a-number` naming the byte, `file-cut` when there are fewer than the header says
 */
export async function* uffTextValues(source: RandomAccess, dataset: UffDataset, total: number): AsyncGenerator<Float64Array> {
  const widths = widthsOf(dataset)
  let carry = new Uint8Array(0)
  let at = dataset.dataOffset
  let found = 0
  for await (const chunk of chunksOf(source, dataset.dataOffset)) {
    const bytes = new Uint8Array(carry.length + chunk.length)
    bytes.set(carry)
    bytes.set(chunk, carry.length)
    const start = at - carry.length
    at += chunk.length
    const values: number[] = []
    let from = 0
    const isLast = at >= source.size
    for (let end = bytes.indexOf(newline); from < bytes.length && found + values.length < total; end = bytes.indexOf(newline, from)) {
      if (end < 0 && !isLast) break
      const stop = end < 0 ? bytes.length : end
      readLine(bytes, from, stop, widths, values, start + from)
      from = stop + 1
    }
    carry = bytes.slice(Math.min(from, bytes.length))
    const kept = Math.min(values.length, total - found)
    found += kept
    if (kept) yield Float64Array.from(values.slice(0, kept))
    if (found >= total) return
  }
  throw cut(dataset, found, total)
}

const cut = (dataset: UffDataset, found: number, total: number) => new RecordError('file-cut', `The dataset 58 at byte ${dataset.byte} ends after ${found} of ${total} numbers. Export or copy the universal file again.`)

/** Widths of a line's fields, over and over. */
function widthsOf({ ordinateType, isEven }: UffDataset): number[] {
  if (ordinateType === 2) return [single]
  return isEven ? [double] : [single, double]
}

function readLine(bytes: Uint8Array, from: number, to: number, widths: number[], values: number[], byte: number): void {
  const before = values.length
  for (let at = from; at < to;) {
    while (at < to && bytes[at] <= space) at++
    if (at >= to) return
    let end = at
    while (end < to && bytes[end] > space) end++
    const value = number(bytes, at, end)
    if (Number.isNaN(value)) {
      values.length = before
      return readColumns(bytes, from, to, widths, values, byte)
    }
    values.push(value)
    at = end
  }
}

function readColumns(bytes: Uint8Array, from: number, to: number, widths: number[], values: number[], byte: number): void {
  for (let at = from, i = 0; at < to; i++) {
    const end = Math.min(to, at + widths[i % widths.length])
    const text = new TextDecoder().decode(bytes.subarray(at, end)).trim()
    const value = number(bytes, at, end)
    if (Number.isNaN(value) && text) throw new RecordError('not-a-number', `At byte ${byte + at - from} of the universal file a number was expected, but “${text.slice(0, 20)}” stands there. Export the file again.`)
    if (text) values.push(value)
    at = end
  }
}

/** Fortran writes 1.0D+05 for double precision; the scanner knows E only. */
function number(bytes: Uint8Array, from: number, to: number): number {
  const value = scanNumber(bytes, from, to)
  if (!Number.isNaN(value)) return value
  const text = new TextDecoder().decode(bytes.subarray(from, to)).trim()
  return /^[-+]?[\d.]+d[-+]?\d+$/i.test(text) ? Number(text.replace(/d/i, 'e')) : Number.NaN
}
