import { newline } from './asciiBytes'
import { findCsvLayout, type CsvLayout } from './csvLayout'
import { RecordError } from './recordError'
import type { RecordColumn } from './recordTable'

/** Enough to hold the preamble and the first rows. */
const headBytes = 1 << 16

export interface CsvHead {
  layout: CsvLayout
  columns: RecordColumn[]
  /** The bytes that were read to find the layout, without byte order mark. */
  bytes: Uint8Array
  /** Whole lines among them. */
  lines: string[]
  /** Bytes of the whole lines; all of the file when `isWhole`. */
  lineBytes: number
  isWhole: boolean
}

/** Read the beginning of a text record in UTF-8 or Latin-1. @throws RecordError `empty`, `no-data`, `ambiguous-delimiter` */
export async function readCsvHead(source: AsyncIterator<Uint8Array>): Promise<CsvHead> {
  let bytes = new Uint8Array(0)
  let ended = false
  while (bytes.length < headBytes && !ended) {
    const next = await source.next()
    ended = next.done === true
    if (!ended) bytes = join(bytes, next.value!)
  }
  if (bytes[0] === 0xef && bytes[1] === 0xbb && bytes[2] === 0xbf) bytes = bytes.subarray(3)
  if (bytes.length === 0) throw new RecordError('empty', 'The record is empty. Upload the file again from the DAQ PC.')
  const whole = ended ? bytes.length : bytes.lastIndexOf(newline) + 1
  const lines = decode(bytes.subarray(0, whole)).split(/\r?\n/)
  if (!ended) lines.pop()
  const layout = findCsvLayout(lines)
  return { layout, bytes, lines, columns: columnsOf(layout), lineBytes: whole, isWhole: ended }
}

function columnsOf({ columnCount, headers, names, units }: CsvLayout): RecordColumn[] {
  return Array.from({ length: columnCount }, (_, index) => ({ index, name: names[index] || `column ${index}`, header: headers[index] ?? '', unit: units[index] ?? null }))
}

function decode(bytes: Uint8Array): string {
  try {
    return new TextDecoder('utf-8', { fatal: true }).decode(bytes)
  } catch {
    return new TextDecoder('windows-1252').decode(bytes)
  }
}

function join(a: Uint8Array, b: Uint8Array): Uint8Array<ArrayBuffer> {
  const both = new Uint8Array(a.length + b.length)
  both.set(a)
  both.set(b, a.length)
  return both
}
