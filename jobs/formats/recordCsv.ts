import type { Flag } from '../../shared/measurement'
import { readCsvHead, type CsvHead } from './csvHead'
import { blanks, delimiterNames, isClock } from './csvLayout'
import { CsvRows, type RowsEnd } from './csvRows'
import { GrowingFloat32 } from './growingFloat32'
import { chooseColumns, type ChosenColumns } from './recordColumns'
import { RecordError } from './recordError'
import { planRecord, type RecordPlan } from './recordSink'
import type { RecordChannel, RecordData, RecordOptions } from './recordTable'
import { asUtf8 } from './utf16'

export { RecordError } from './recordError'

/** Rows that tell whether a column without a name is the time. */
const evidenceRows = 64

/**
 * Read a DAQ record from CSV or TSV.
 *
 * Delimiter (tab, semicolon, comma, bar, blanks), decimal comma, preamble, header and an optional row of units are found
 * from the content. Only header rows go through csv-parse; data rows are scanned as bytes, because a record has millions.
 * Memory: four bytes a sample and wanted channel, twice that for one channel at the end; columns that are not wanted cost none.
 *
 * @param bytes the file in pieces of any size; UTF-8, Latin-1 or UTF-16
 * @throws RecordError: `empty`, `no-data`, `ambiguous-delimiter`, `too-short` (fewer than two rows), `no-illumination`,
 * `unknown-column`, `ambiguous-columns`, `no-time`, `clock-times`, `not-a-number`, `overload`, `column-missing`, `time-not-uniform`,
 * `sensitivity-not-volts`
 */
export async function readCsvRecord(bytes: AsyncIterable<Uint8Array>, options: RecordOptions = {}): Promise<RecordData> {
  const source = asUtf8(bytes)
  const head = await readCsvHead(source)
  const { layout, columns } = head
  const chosen = chooseCsvColumns(head, options, firstCsvRows(head, evidenceRows))
  const plan = planRecord(columns, chosen, options, chosen.columns.time === undefined ? layout.sampleRateHz : null, 0, 'Line')
  const sink = new Sink(plan)
  const rows = new CsvRows(layout, plan.wanted, sink.add)
  rows.feed(head.bytes)
  for (let next = await source.next(); !next.done; next = await source.next()) rows.feed(next.value)
  const end = rows.finish()
  if (sink.rows < 2) throw new RecordError('too-short', `The record has ${sink.rows === 1 ? 'one row' : 'no rows'} of numbers. Upload a record with at least two samples.`)
  const time = plan.timeBase()
  return {
    format: 'csv', description: describeCsv(head), columns, channels: sink.channels(), rows: sink.rows,
    sampleRateHz: time.sampleRateHz, startSeconds: time.startSeconds, flags: [...time.flags, ...plan.flags, ...endFlags(end)],
  }
}

/**
 * `chooseColumns`, but a time column of clock times gives way to a sample rate: such times have too few digits for a fast record.
 *
 * @throws RecordError `clock-times` when there is no rate either, and as `chooseColumns`
 */
export function chooseCsvColumns({ layout, lines, columns }: CsvHead, { columns: asked = {}, sampleRateHz }: RecordOptions, first: readonly Float64Array[]): ChosenColumns {
  const chosen = chooseColumns(columns, asked, first)
  const { time, ...channels } = chosen.columns
  const cell = time === undefined ? '' : splitRow(lines[layout.headerLines], layout.delimiter)[time] ?? ''
  if (time === undefined || !isClock(cell)) return chosen
  const name = columns[time].header || columns[time].name
  if (sampleRateHz === undefined && layout.sampleRateHz === null) throw new RecordError('clock-times', `Line ${layout.headerLines + 1}, column “${name}” holds a clock time, “${cell.trim()}”; seconds were expected. Give the sample rate in Hz, or export the time in seconds.`)
  return { columns: channels, flags: [...chosen.flags, { code: 'clock-times', severity: 'note', message: `“${name}” holds clock times and was not used; the sample rate of ${sampleRateHz ?? layout.sampleRateHz} Hz stands. Check that the record has no gaps.` }] }
}

/** "Text, 3 columns, semicolons". */
export function describeCsv({ layout: { delimiter, columnCount } }: CsvHead): string {
  return delimiter ? `Text, ${columnCount} columns, ${delimiterNames[delimiter]}` : 'Text, one column'
}

/** The first values of every column; NaN where there is no number. */
export function firstCsvRows({ layout, columns, lines }: CsvHead, count: number): Float64Array[] {
  const cells = lines.slice(layout.headerLines).filter(line => line.trim()).slice(0, count).map(line => splitRow(line, layout.delimiter))
  const number = (text: string | undefined) => text?.trim() ? Number(text.replace(/"/g, '').replace(',', '.')) : Number.NaN
  return columns.map(({ index }) => Float64Array.from(cells, row => number(row[index])))
}

function splitRow(line: string, delimiter: string): string[] {
  if (delimiter === blanks) return line.trim().split(/[ \t]+/)
  return delimiter ? line.split(delimiter) : [line]
}

function endFlags({ cutLine, footer }: RowsEnd): Flag[] {
  const flags: Flag[] = []
  if (cutLine !== null) flags.push({ code: 'last-line-cut', severity: 'warning', message: `The last line, ${cutLine}, is cut off and was left out. Check that the logger finished the file.` })
  if (footer) flags.push({ code: 'footer', severity: 'warning', message: `${footer.firstLine === footer.lastLine ? `Line ${footer.firstLine}` : `Lines ${footer.firstLine} to ${footer.lastLine}`} at the end, “${footer.text}”, ${footer.firstLine === footer.lastLine ? 'is no row and was' : 'are no rows and were'} left out. Check that the record is whole.` })
  return flags
}

/** Takes rows of the wanted columns: the channels first, then the time. */
class Sink {
  rows = 0
  private readonly values: GrowingFloat32[]
  private readonly factors: Float64Array

  constructor(private readonly plan: RecordPlan) {
    this.values = plan.channels.map(() => new GrowingFloat32())
    this.factors = Float64Array.from(plan.channels, ({ scale }) => scale.factor)
  }

  add = (row: Float64Array, line: number): void => {
    const { values, factors, plan } = this
    for (let i = 0; i < values.length; i++) values[i].push(factors[i] * row[i])
    plan.times?.add(row[values.length] * plan.timeScale, line)
    this.rows++
  }

  channels(): RecordChannel[] {
    return this.plan.channels.map(({ role, column, scale }, i) => ({ role, name: column.name, unit: scale.unit, data: this.values[i].take() }))
  }
}
