import { parse } from 'csv-parse/browser/esm/sync'
import { RecordError } from './recordError'
import { scanNumber } from './numberScan'

export interface CsvLayout {
  /** One character, a blank for runs of blanks and tabs; an empty string when there is one column only. */
  delimiter: string
  columnCount: number
  /** Lines before the first data row. */
  headerLines: number
  /** Header text of each column as written; empty when there is no header. */
  headers: string[]
  /** Header text without its unit. */
  names: string[]
  units: (string | null)[]
  /** What a line of the preamble says of the sample rate. */
  sampleRateHz: number | null
}

export const blanks = ' '
export const delimiters = ['\t', ';', ',', '|', blanks]
export const delimiterNames: Record<string, string> = { '\t': 'tabs', ';': 'semicolons', ',': 'commas', '|': 'bars', [blanks]: 'blanks', '': 'nothing' }
/** What loggers write where an input was overloaded. */
export const overload = /^"?[-+]?\s*(?:ovl|ovld|ol|ovr|over(?:load|flow|range)?|1\.?#inf\w*|inf(?:inity)?|∞|clip(?:ped)?)"?$/i
/** "10:00:01.250", "2024-05-01T10:00:01Z", "01.05.2024 10:00:01", or the date alone. */
const clock = /^"?(?:\d{1,4}[-/.]\d{1,2}[-/.]\d{1,4})?[T ]*(?:\d{1,2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?\s*(?:[AP]M|Z|[+-]\d{2}:?\d{2})?)?"?$/i
/** The expressions below are for titles; what is longer is none. */
const longestHeader = 400
const quote = 60

/**
 * Find out how a DAQ text file is laid out: what separates its columns, where its numbers begin, what its columns are
 * called. Numbers begin at the first line of two or more columns that are all numbers, clock times or empty, when the line after it is so too;
 * whatever lies before is preamble, its last line the header, or the last but one when a row of units follows.
 *
 * @param lines the file's beginning, without line ends; the last one must be whole
 * @throws RecordError `no-data`, `ambiguous-delimiter`
 */
export function findCsvLayout(lines: readonly string[]): CsvLayout {
  for (const delimiter of [...delimiters, '']) {
    const headerLines = firstDataLine(lines, delimiter)
    const preamble = lines.slice(0, headerLines)
    if (headerLines < 0 || isDecimalComma(preamble, delimiter)) continue
    const columnCount = countColumns(lines[headerLines], preamble, delimiter)
    assertClear(preamble, delimiter, columnCount, headerLines)
    return { delimiter, columnCount, headerLines, ...readHeader(preamble, delimiter, columnCount), sampleRateHz: statedRate(preamble) }
  }
  const shown = lines.find(line => line.trim()) ?? ''
  throw new RecordError('no-data', `No rows of numbers were found; the first line reads “${shown.slice(0, quote)}”. Export the record as CSV or TSV with one row a sample.`)
}

/** A delimiter at the end of rows opens no column, unless the header has a name for it. */
function countColumns(row: string, preamble: readonly string[], delimiter: string): number {
  const { length } = splitData(row, delimiter)
  const header = preamble.findLast(line => line.trim())
  const isNamed = delimiter && delimiter !== blanks && header !== undefined && row.split(delimiter).length === length + 1 && splitHeader(header, delimiter)[length]
  return isNamed ? length + 1 : length
}

/** Rows like "1,5" under a header without a comma are one column with decimal commas, not two columns. */
function isDecimalComma(preamble: readonly string[], delimiter: string): boolean {
  const header = preamble.findLast(line => line.trim())
  return delimiter === ',' && header !== undefined && !header.includes(',')
}

/** Rows like "1,5,2,5" under a header of two columns: which comma is which cannot be known. */
function assertClear(preamble: readonly string[], delimiter: string, columnCount: number, headerLines: number): void {
  const header = preamble.findLast(line => line.trim())
  const named = delimiter === ',' && header !== undefined ? splitHeader(header, delimiter).length : 0
  if (named > 1 && columnCount === 2 * named) throw new RecordError('ambiguous-delimiter', `Line ${headerLines + 1} has ${columnCount} cells under a header of ${named}: commas seem to separate columns and to mark decimals too. Export the record with semicolons or tabs between the columns.`)
}

/** Cells of a data row; an empty last cell (a row that ends in a delimiter) does not count. */
function splitData(line: string, delimiter: string): string[] {
  if (delimiter === blanks) return line.trim().split(/[ \t]+/)
  const cells = delimiter ? line.split(delimiter) : [line]
  if (cells.length > 1 && !cells.at(-1)!.trim()) cells.pop()
  return cells
}

function firstDataLine(lines: readonly string[], delimiter: string): number {
  const filled = lines.flatMap((line, i) => line.trim() ? [i] : [])
  const columns = filled.map(i => numericColumns(lines[i], delimiter))
  const least = delimiter ? 2 : 1
  // The next row may lack a cell, and the last line may stand alone: both are told later, by line.
  const at = columns.findIndex((count, i) => count >= least && (columns[i + 1] > 0 || i === columns.length - 1))
  return at < 0 ? -1 : filled[at]
}

/** Number of columns of a line of numbers; 0 when it is something else. */
function numericColumns(line: string, delimiter: string): number {
  const cells = splitData(line, delimiter)
  const bytes = new TextEncoder()
  const values = cells.map((cell) => {
    const text = bytes.encode(cell)
    return cell.trim() === '' || /^\s*"?nan"?\s*$/i.test(cell) || overload.test(cell.trim()) || isClock(cell) ? null : scanNumber(text, 0, text.length)
  })
  const numbers = values.filter(value => value !== null)
  return numbers.length && !numbers.some(Number.isNaN) ? cells.length : 0
}

export const isClock = (cell: string): boolean => /\d/.test(cell) && clock.test(cell.trim())

function readHeader(preamble: readonly string[], delimiter: string, columnCount: number): Pick<CsvLayout, 'headers' | 'names' | 'units'> {
  const [last, before] = preamble.filter(line => line.trim()).reverse().map(line => headerCells(line, delimiter, columnCount))
  if (!last) return { headers: [], names: [], units: Array.from({ length: columnCount }, () => null) }
  const hasUnitRow = last.every(cell => !cell || isUnit(cell)) && !!before
  const headers = hasUnitRow ? before : last
  const split = headers.map(splitUnit)
  return { headers, names: split.map(({ name }) => name), units: split.map(({ unit }, i) => unit ?? (hasUnitRow && last[i] ? bare(last[i]) : null)) }
}

/** One cell a column, by the rows' own delimiter or by another one; null when no way of splitting gives that many. */
function headerCells(line: string, delimiter: string, columnCount: number): string[] | null {
  for (const way of [delimiter, ...delimiters]) {
    const cells = splitHeader(line, way)
    if (cells.length >= columnCount && cells.slice(columnCount).every(cell => !cell)) return cells.slice(0, columnCount)
  }
  const wide = line.replace(/^[#%]\s*/, '').trim().split(/\t+|\s{2,}/)
  return wide.length === columnCount ? wide : null
}

function splitHeader(line: string, delimiter: string): string[] {
  const text = line.replace(/^\uFEFF?[#%]?\s*/, '')
  if (!delimiter) return [text.replace(/^"|"$/g, '').trim()]
  const rows = parse(delimiter === blanks ? text.trim().replace(/[ \t]+/g, blanks) : text, { delimiter, relax_quotes: true, relax_column_count: true, trim: true }) as string[][]
  return rows[0] ?? []
}

/** "Sample rate: 51200 Hz", "Sampling frequency;51,2;kHz". */
function statedRate(preamble: readonly string[]): number | null {
  for (const line of preamble.filter(({ length }) => length <= longestHeader)) {
    const [, number, kilo] = /(?:sampl\w*[\s_-]*(?:rate|freq\w*)|abtastrate|\bfs\b)[^\d]{0,20}?(\d+(?:[.,]\d+)?(?:e[+-]?\d+)?)[\s;,"[(]*(k?)(?:Hz|S\/s|$)?/i.exec(line) ?? []
    const rate = number ? Number(number.replace(',', '.')) * (kilo ? 1e3 : 1) : 0
    if (rate > 0) return rate
  }
  return null
}

const unitPattern = /^(?:s|sec|ms|µs|us|min|V|mV|µV|A|mA|N|kN|lbf|g|gn|m\/s²|m\/s\^2|m\/s2|mm\/s²|m\/s|mm|µm|m|Pa|W|lx|lm|Hz|%|EU|-|1|°C)$/i
const bare = (text: string) => text.replace(/^[[(]|[\])]$/g, '').trim()
const isUnit = (text: string) => unitPattern.test(bare(text))

/** "Force [N]", "Force (N)" or "Force / N". */
export function splitUnit(header: string): { name: string, unit: string | null } {
  if (header.length > longestHeader) return { name: header, unit: null }
  const [, name, bracketed, slashed] = /^(.*\S)\s*(?:[[(]([^\])]*)[\])]|\s\/\s+(\S+))$/.exec(header) ?? []
  return name === undefined ? { name: header, unit: null } : { name, unit: bracketed?.trim() || slashed || null }
}
