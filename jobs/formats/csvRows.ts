import { carriageReturn, newline, space, tab } from './asciiBytes'
import { blanks, delimiterNames, delimiters, overload, type CsvLayout } from './csvLayout'
import { scanNumber } from './numberScan'
import { QuickRow } from './quickRow'
import { RecordError } from './recordError'

/** SCPI's numbers for "overload" and "no number" (SCPI-1999, volume 1, 7.2.1; from memory). */
const smallestSentinel = 9.9e37
const longestShown = 4000
/** Lines of text after the last row of numbers that are passed over as a footer. */
const footerLines = 20

export interface RowsEnd {
  /** The number of a last line that ends early and was left out. */
  cutLine: number | null
  /** Lines after the last row that are no rows and were left out. */
  footer: { firstLine: number, lastLine: number, text: string } | null
}

/**
 * Scans data rows as bytes, in pieces of any size, and hands over the wanted columns of each.
 *
 * The values array is reused from row to row. Empty lines are skipped. Lines that are no rows are errors when a row
 * follows them, and a footer when none does.
 */
export class CsvRows {
  private carry = new Uint8Array(0)
  private line = 0
  private readonly values: Float64Array
  private readonly delimiter: number
  private readonly isRuns: boolean
  /** Column → places in `values`. */
  private readonly places: number[][]
  private readonly quick: QuickRow | null
  private doubt: { error: RecordError, line: number, text: string } | null = null

  constructor(private readonly layout: CsvLayout, wanted: readonly number[], private readonly onRow: (values: Float64Array, line: number) => void) {
    this.values = new Float64Array(wanted.length)
    this.delimiter = layout.delimiter ? layout.delimiter.charCodeAt(0) : -1
    this.isRuns = layout.delimiter === blanks
    this.places = Array.from({ length: Math.max(...wanted) + 1 }, (_, column) => wanted.flatMap((value, place) => value === column ? [place] : []))
    this.quick = this.isRuns || this.places.some(({ length }) => length > 1) ? null : new QuickRow(this.delimiter, this.places.map(([place = -1]) => place), this.values)
  }

  /** @throws RecordError `not-a-number`, `overload`, `column-missing`, naming the line */
  feed(chunk: Uint8Array): void {
    let at = 0
    if (this.carry.length) {
      const end = chunk.indexOf(newline)
      const line = join(this.carry, end < 0 ? chunk : chunk.subarray(0, end + 1))
      this.carry = end < 0 ? line : new Uint8Array(0)
      if (end < 0) return
      this.lines(line, 0, line.length)
      at = end + 1
    }
    const stop = Math.max(at, chunk.lastIndexOf(newline) + 1)
    this.lines(chunk, at, stop)
    this.carry = new Uint8Array(chunk.subarray(stop))
  }

  /** Whole lines, each with its end. */
  private lines(bytes: Uint8Array, from: number, stop: number): void {
    for (let at = from; at < stop;) {
      const next = this.quick && !this.doubt && this.line >= this.layout.headerLines ? this.quick.read(bytes, at) : 0
      if (next > 0) {
        this.onRow(this.values, ++this.line)
        at = next
      } else {
        const end = bytes.indexOf(newline, at)
        this.row(bytes, at, end)
        at = end + 1
      }
    }
  }

  /** Takes the last line if it is whole. */
  finish(): RowsEnd {
    let cutLine: number | null = null
    if (this.carry.length && !isEmpty(this.carry, 0, this.carry.length)) {
      if (this.cells(this.carry) < this.layout.columnCount && !this.doubt) cutLine = this.line + 1
      else this.row(this.carry, 0, this.carry.length)
    }
    return { cutLine, footer: this.doubt && { firstLine: this.doubt.line, lastLine: this.line, text: this.doubt.text } }
  }

  private cells(bytes: Uint8Array): number {
    if (this.delimiter < 0) return 1
    return new TextDecoder().decode(bytes).trim().split(this.isRuns ? /[ \t]+/ : this.layout.delimiter).length
  }

  private row(bytes: Uint8Array, from: number, to: number): void {
    this.line++
    if (this.line <= this.layout.headerLines || isEmpty(bytes, from, to)) return
    const error = this.read(bytes, from, bytes[to - 1] === carriageReturn ? to - 1 : to)
    if (error === null) {
      if (this.doubt) throw this.doubt.error
      this.onRow(this.values, this.line)
      return
    }
    this.doubt ??= { error, line: this.line, text: textOf(bytes, from, to) }
    if (error.code === 'overload' || this.line - this.doubt.line >= footerLines) throw this.doubt.error
  }

  /** The wanted columns of a line into `values`; an error instead of a throw, because a footer may still excuse it. */
  private read(bytes: Uint8Array, from: number, to: number): RecordError | null {
    const { places, delimiter, values, isRuns } = this
    let start = isRuns ? skipBlanks(bytes, from, to) : from
    for (let column = 0; column < places.length; column++) {
      if (start > to || (isRuns && start === to)) return this.missing(column, textOf(bytes, from, to, longestShown))
      const wanted = places[column]
      let end = start
      while (end < to && bytes[end] !== delimiter && !(isRuns && bytes[end] === tab)) end++
      if (wanted.length) {
        const value = scanNumber(bytes, start, end)
        if (!(Math.abs(value) < smallestSentinel)) return this.notANumber(column, value, textOf(bytes, start, end), textOf(bytes, from, to, longestShown))
        for (let i = 0; i < wanted.length; i++) values[wanted[i]] = value
      }
      start = isRuns ? skipBlanks(bytes, end, to) : end + 1
    }
    return null
  }

  private columnName = (column: number) => this.layout.headers[column] ? `column “${this.layout.headers[column]}”` : `column ${column}`

  private missing(column: number, line: string): RecordError {
    return this.splitOtherwise(line) ?? new RecordError('column-missing', `Line ${this.line} ends before ${this.columnName(column)}. Export the record again, with every column in every row.`)
  }

  /** Whether another delimiter gives the line its columns. */
  private splitOtherwise(line: string): RecordError | null {
    const { delimiter: own, columnCount } = this.layout
    if (line.split(own).length === columnCount) return null
    const other = delimiters.find(delimiter => delimiter !== own && delimiter !== blanks && line.split(delimiter).length === columnCount)
    return other === undefined ? null : new RecordError('column-missing', `Line ${this.line} is split by ${delimiterNames[other]}, but the rows before it by ${delimiterNames[own]}. Export the record again, with one separator throughout.`)
  }

  private notANumber(column: number, value: number, text: string, line: string): RecordError {
    const otherwise = this.splitOtherwise(line)
    if (otherwise) return otherwise
    const where = `Line ${this.line}, ${this.columnName(column)}`
    if (overload.test(text) || Math.abs(value) === smallestSentinel) return new RecordError('overload', `${where}: “${text}” says that the input was overloaded, so its value is not known. Turn the input range up and record again.`)
    return new RecordError('not-a-number', `${where}: a number was expected, but ${text ? `“${text}”` : 'nothing'} stands there. Mend the line or export the record again.`)
  }
}

function join(a: Uint8Array, b: Uint8Array): Uint8Array<ArrayBuffer> {
  const both = new Uint8Array(a.length + b.length)
  both.set(a)
  both.set(b, a.length)
  return both
}

function textOf(bytes: Uint8Array, from: number, to: number, most = 40): string {
  return new TextDecoder().decode(bytes.subarray(from, Math.min(to, from + most))).trim()
}

function skipBlanks(bytes: Uint8Array, from: number, to: number): number {
  while (from < to && (bytes[from] === space || bytes[from] === tab)) from++
  return from
}

function isEmpty(bytes: Uint8Array, from: number, to: number): boolean {
  for (let i = from; i < to; i++) if (bytes[i] > space) return false
  return true
}
