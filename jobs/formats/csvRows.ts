import type { CsvLayout } from './csvLayout'
import { scanNumber } from './numberScan'
import { RecordError } from './recordError'

const newline = 0x0a

/**
 * Scans data rows as bytes, in pieces of any size, and hands over the wanted columns of each.
 *
 * The values array is reused from row to row. Empty lines are skipped.
 */
export class CsvRows {
  private carry = new Uint8Array(0)
  private line = 0
  private readonly values: Float64Array
  private readonly delimiter: number
  /** Column → places in `values`. */
  private readonly places: number[][]

  constructor(private readonly layout: CsvLayout, wanted: readonly number[], private readonly onRow: (values: Float64Array, line: number) => void) {
    this.values = new Float64Array(wanted.length)
    this.delimiter = layout.delimiter ? layout.delimiter.charCodeAt(0) : -1
    this.places = Array.from({ length: Math.max(...wanted) + 1 }, (_, column) => wanted.flatMap((value, place) => value === column ? [place] : []))
  }

  /** @throws RecordError `not-a-number`, `column-missing`, naming the line */
  feed(chunk: Uint8Array): void {
    let bytes = chunk
    if (this.carry.length) {
      bytes = new Uint8Array(this.carry.length + chunk.length)
      bytes.set(this.carry)
      bytes.set(chunk, this.carry.length)
    }
    let at = 0
    for (let end = bytes.indexOf(newline); end >= 0; end = bytes.indexOf(newline, at)) {
      this.row(bytes, at, end)
      at = end + 1
    }
    this.carry = new Uint8Array(bytes.subarray(at))
  }

  /** Takes the last line if it is whole. @returns its number when it ends early and was left out */
  finish(): { cutLine: number | null } {
    if (!this.carry.length) return { cutLine: null }
    const cells = this.delimiter < 0 ? 1 : this.carry.reduce((count, byte) => byte === this.delimiter ? count + 1 : count, 1)
    if (cells < this.layout.columnCount && this.carry.some(byte => byte > 0x20)) return { cutLine: this.line + 1 }
    this.row(this.carry, 0, this.carry.length)
    return { cutLine: null }
  }

  private row(bytes: Uint8Array, from: number, to: number): void {
    this.line++
    if (this.line <= this.layout.headerLines || isEmpty(bytes, from, to)) return
    let start = from
    for (let column = 0; column < this.places.length; column++) {
      if (start > to) throw this.missing(column)
      let end = start
      while (end < to && bytes[end] !== this.delimiter) end++
      for (const place of this.places[column]) {
        const value = scanNumber(bytes, start, end)
        if (Number.isNaN(value)) throw this.notANumber(column, bytes, start, end)
        this.values[place] = value
      }
      start = end + 1
    }
    this.onRow(this.values, this.line)
  }

  private columnName = (column: number) => this.layout.headers[column] ? `column “${this.layout.headers[column]}”` : `column ${column}`

  private missing(column: number): RecordError {
    return new RecordError('column-missing', `Line ${this.line} ends before ${this.columnName(column)}. Export the record again, with every column in every row.`)
  }

  private notANumber(column: number, bytes: Uint8Array, from: number, to: number): RecordError {
    const text = new TextDecoder().decode(bytes.subarray(from, Math.min(to, from + 40))).trim()
    return new RecordError('not-a-number', `Line ${this.line}, ${this.columnName(column)}: a number was expected, but ${text ? `“${text}”` : 'nothing'} stands there. Mend the line or export the record again.`)
  }
}

function isEmpty(bytes: Uint8Array, from: number, to: number): boolean {
  for (let i = from; i < to; i++) if (bytes[i] > 0x20) return false
  return true
}
