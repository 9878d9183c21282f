import type { Flag } from '../../shared/measurement'
import { chooseColumns, type ChosenColumns } from './recordColumns'
import { RecordError } from './recordError'
import { planRecord, storeBlock } from './recordSink'
import type { RecordData, RecordOptions, RecordSeries, RecordTable } from './recordTable'

const evidenceRows = 64
const sameRate = 1e-6
/** Four GiB a channel: a header that claims more is damaged, or made to exhaust the memory. */
const mostRows = 2 ** 30

/**
 * Read the wanted channels of an opened record.
 *
 * Memory: four bytes a sample and wanted channel, and one block.
 *
 * @throws RecordError `too-short`, `too-long`, `no-illumination`, `unknown-column`, `ambiguous-columns`, `no-time`, `time-not-uniform`,
 * `not-a-number`, `sensitivity-not-volts`, `file-cut`
 */
export async function readTable(table: RecordTable, options: RecordOptions): Promise<RecordData> {
  const { format, description, columns, sampleRateHz } = table
  const asked = options.columns ?? {}
  const needsEvidence = sampleRateHz === null && asked.time === undefined && options.sampleRateHz === undefined
  const chosen = chooseColumns(columns, asked, needsEvidence ? await firstRows(table, evidenceRows) : undefined)
  const series = commonSeries(table, chosen.columns)
  const plan = planRecord(columns, chosen, options, series.sampleRateHz, series.startSeconds, 'Sample')
  const { rows } = series
  if (rows < 2) throw new RecordError('too-short', `The record has ${rows === 1 ? 'one sample' : 'no samples'}. Upload a record with at least two samples.`)
  if (rows > mostRows) throw new RecordError('too-long', `The record says that it has ${rows} samples a channel; at most ${mostRows} are read. Cut it into parts, or record at a lower rate.`)
  const data = plan.channels.map(() => new Float32Array(rows))
  let at = 0
  for await (const block of table.blocks(plan.wanted, 0, rows)) {
    plan.channels.forEach((channel, i) => storeBlock(block[i], data[i], at, channel))
    if (plan.times) addTimes(plan.times, block.at(-1)!, plan.timeScale, at)
    at += block[0].length
  }
  const time = plan.timeBase()
  return {
    format, description, columns, rows, sampleRateHz: time.sampleRateHz, startSeconds: time.startSeconds,
    channels: plan.channels.map(({ role, column, scale }, i) => ({ role, name: column.name, unit: scale.unit, data: data[i] })),
    flags: [...table.flags, ...series.flags, ...time.flags, ...plan.flags],
  }
}

function addTimes(times: { add: (time: number, row: number) => void }, block: Float64Array, scale: number, at: number): void {
  for (let i = 0; i < block.length; i++) times.add(block[i] * scale, at + i)
}

/**
 * Length, rate and start that hold for the chosen channels together; the shortest one's length. A time column
 * only counts where the channels have no rate of their own.
 *
 * @throws RecordError `rates-differ`, `starts-differ`
 */
export function commonSeries(table: RecordTable, { time, ...channels }: ChosenColumns['columns']): RecordSeries & { flags: Flag[] } {
  const { seriesOf, columns, rows, sampleRateHz, startSeconds } = table
  if (!seriesOf) return { rows, sampleRateHz, startSeconds, flags: [] }
  const indices = Object.values(channels)
  const all = indices.map(seriesOf)
  const name = (index: number) => `“${columns[index].name}”`
  const [first] = all
  const rate = first.sampleRateHz
  const hertz = (value: number | null) => value === null ? 'an unknown rate' : `${Number(value.toPrecision(9))} Hz`
  const other = all.findIndex(series => series.sampleRateHz !== rate && !(rate && series.sampleRateHz && Math.abs(series.sampleRateHz / rate - 1) < sameRate))
  if (other > 0) throw new RecordError('rates-differ', `The channels are not sampled alike: ${name(indices[0])} at ${hertz(rate)}, ${name(indices[other])} at ${hertz(all[other].sampleRateHz)}. Take channels of one rate, or export them so.`)
  const late = all.findIndex(series => Math.abs(series.startSeconds - first.startSeconds) * (rate ?? 1) > 0.5)
  if (late > 0) throw new RecordError('starts-differ', `The channels do not begin together: ${name(indices[0])} at ${first.startSeconds} s, ${name(indices[late])} at ${all[late].startSeconds} s. Export them over one span.`)
  const lengths = [...all, ...time !== undefined && rate === null ? [seriesOf(time)] : []].map(series => series.rows)
  const shortest = Math.min(...lengths)
  const flags: Flag[] = lengths.some(length => length !== shortest) ? [{ code: 'lengths-differ', severity: 'warning', message: `The channels are not of one length; all are read for ${shortest} samples, as long as the shortest. Check that the record is whole.` }] : []
  return { rows: shortest, sampleRateHz: rate, startSeconds: first.startSeconds, flags }
}

/** The first values of every column, at most `count`. */
export async function firstRows(table: RecordTable, count: number): Promise<Float64Array[]> {
  const { columns, seriesOf, rows } = table
  if (!seriesOf) return gather(table, columns.map(({ index }) => index), Math.min(rows, count))
  const all: Float64Array[] = []
  for (const { index } of columns) all.push(...await gather(table, [index], Math.min(seriesOf(index).rows, count)))
  return all
}

async function gather({ blocks }: RecordTable, wanted: number[], count: number): Promise<Float64Array[]> {
  const parts: number[][] = wanted.map(() => [])
  if (count > 0) for await (const block of blocks(wanted, 0, count)) block.forEach((values, i) => parts[i].push(...values))
  return parts.map(values => Float64Array.from(values))
}
