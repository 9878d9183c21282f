import type { Flag } from '../../shared/measurement'
import { channelRoles, type ChannelRole } from '../../shared/records'
import { findCsvLayout, type CsvLayout } from './csvLayout'
import { CsvRows } from './csvRows'
import { GrowingFloat32 } from './growingFloat32'
import { chooseColumns, type ChosenColumns, type ColumnMapping } from './recordColumns'
import { RecordError } from './recordError'
import { GivenRate, UniformTime, type TimeBase } from './uniformTime'

export { RecordError } from './recordError'

export interface RecordChannel {
  role: ChannelRole
  /** Header without its unit, or "column 3". */
  name: string
  unit: string | null
  data: Float32Array
}

export interface CsvRecord {
  channels: RecordChannel[]
  sampleRateHz: number
  /** Time of the first row as the file counts it; 0 without a time column. */
  startSeconds: number
  rows: number
  flags: Flag[]
}

export interface CsvRecordOptions {
  columns?: ColumnMapping
  /** Goes before the time column's own rate. */
  sampleRateHz?: number
  /** Go before the units in the file. */
  units?: Partial<Record<ChannelRole, string>>
}

/** Enough to hold the preamble and the first rows. */
const headBytes = 1 << 16
const secondsPerUnit: Record<string, number> = { ms: 1e-3, us: 1e-6, µs: 1e-6, μs: 1e-6, min: 60 }

/**
 * Read a DAQ record from CSV or TSV.
 *
 * Delimiter (tab, semicolon, comma), decimal comma, preamble, header and an optional row of units are found from the
 * content. Only header rows go through csv-parse; data rows are scanned as bytes, because a record has millions.
 * Memory: four bytes a sample and channel, twice that for one channel at the end.
 *
 * @param bytes the file in pieces of any size, UTF-8 or Latin-1
 * @throws RecordError: `empty`, `no-data`, `too-short` (fewer than two rows), `no-illumination`, `unknown-column`,
 * `ambiguous-columns`, `no-time`, `not-a-number`, `column-missing`, `time-not-uniform`, `text-encoding`
 */
export async function readCsvRecord(bytes: AsyncIterable<Uint8Array>, { columns: asked = {}, sampleRateHz, units = {} }: CsvRecordOptions = {}): Promise<CsvRecord> {
  const source = bytes[Symbol.asyncIterator]()
  const head = await readHead(source)
  const layout = findCsvLayout(head.lines)
  const chosen = chooseColumns(layout, asked)
  if (chosen.columns.time === undefined && sampleRateHz === undefined) throw new RecordError('no-time', 'The record has neither a time column nor a sample rate. Say which column is the time, or give the sample rate in Hz.')
  const sink = new Sink(layout, chosen, sampleRateHz)
  const rows = new CsvRows(layout, sink.wanted, sink.add)
  rows.feed(head.bytes)
  for (let next = await source.next(); !next.done; next = await source.next()) rows.feed(next.value)
  const { cutLine } = rows.finish()
  if (sink.rows < 2) throw new RecordError('too-short', `The record has ${sink.rows === 1 ? 'one row' : 'no rows'} of numbers. Upload a record with at least two samples.`)
  const time = sink.time()
  const flags = [...time.flags, ...columnFlags(layout, chosen, asked)]
  if (cutLine !== null) flags.push({ code: 'last-line-cut', severity: 'warning', message: `The last line, ${cutLine}, is cut off and was left out. Check that the logger finished the file.` })
  return { channels: sink.channels(units), sampleRateHz: time.sampleRateHz, startSeconds: time.startSeconds, rows: sink.rows, flags }
}

async function readHead(source: AsyncIterator<Uint8Array>): Promise<{ bytes: Uint8Array, lines: string[] }> {
  let bytes = new Uint8Array(0)
  let ended = false
  while (bytes.length < headBytes && !ended) {
    const next = await source.next()
    ended = next.done === true
    if (!ended) bytes = join(bytes, next.value)
  }
  if (bytes.length === 0) throw new RecordError('empty', 'The record is empty. Upload the file again from the DAQ PC.')
  if ((bytes[0] === 0xff && bytes[1] === 0xfe) || (bytes[0] === 0xfe && bytes[1] === 0xff)) throw new RecordError('text-encoding', 'The record is written as UTF-16. Export it as UTF-8 or plain text.')
  const lines = new TextDecoder().decode(bytes).split(/\r?\n/)
  if (!ended) lines.pop()
  return { bytes, lines }
}

function join(a: Uint8Array, b: Uint8Array): Uint8Array<ArrayBuffer> {
  const both = new Uint8Array(a.length + b.length)
  both.set(a)
  both.set(b, a.length)
  return both
}

/** Takes rows of the wanted columns: the channels first, then the time. */
class Sink {
  rows = 0
  readonly wanted: number[]
  private readonly roles: ChannelRole[]
  private readonly values: GrowingFloat32[]
  private readonly times: UniformTime | GivenRate | null
  private readonly timeScale: number

  constructor(private readonly layout: CsvLayout, { columns }: ChosenColumns, private readonly givenRateHz: number | undefined) {
    this.roles = channelRoles.filter(role => columns[role] !== undefined)
    this.values = this.roles.map(() => new GrowingFloat32())
    this.wanted = [...this.roles.map(role => columns[role]!), ...columns.time === undefined ? [] : [columns.time]]
    this.times = columns.time === undefined ? null : givenRateHz === undefined ? new UniformTime() : new GivenRate(givenRateHz)
    this.timeScale = secondsPerUnit[layout.units[columns.time ?? 0]?.toLowerCase() ?? ''] ?? 1
  }

  add = (row: Float64Array, line: number): void => {
    for (let i = 0; i < this.values.length; i++) this.values[i].push(row[i])
    this.times?.add(row[this.values.length] * this.timeScale, line)
    this.rows++
  }

  time(): TimeBase {
    return this.times?.finish() ?? { sampleRateHz: this.givenRateHz!, startSeconds: 0, flags: [] }
  }

  channels(units: Partial<Record<ChannelRole, string>>): RecordChannel[] {
    return this.roles.map((role, i) => {
      const column = this.wanted[i]
      return { role, name: this.layout.names[column] || `column ${column}`, unit: units[role] ?? this.layout.units[column] ?? null, data: this.values[i].take() }
    })
  }
}

function columnFlags({ headers }: CsvLayout, { columns, passedOver }: ChosenColumns, asked: ColumnMapping): Flag[] {
  const flags: Flag[] = passedOver.map(({ role, headers: others }) => ({ code: 'other-columns', severity: 'note', message: `“${headers[columns[role]!]}” is taken as the ${role}; ${others.map(name => `“${name}”`).join(', ')} could be meant as well.` }))
  if (asked.illumination === undefined) flags.push({ code: 'columns-guessed', severity: 'note', message: `The lamp signal is taken from “${headers[columns.illumination!]}”. If that is wrong, say which column it is.` })
  return flags
}
