import type { Dataset } from 'h5wasm'
import { lastComplaint, openHdf5File } from './hdf5File'
import { findHdf5Columns, type Hdf5Column } from './hdf5Tree'
import type { RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import type { RecordTable } from './recordTable'

const signature = [0x89, 0x48, 0x44, 0x46, 0x0d, 0x0a, 0x1a, 0x0a]
const largestUserBlock = 1 << 20
const blockValues = 1 << 17

type Values = ArrayLike<number | bigint>

/** Whether a file has the HDF5 signature at byte 0, or after a user block of 512 bytes or twice, four times … that. */
export async function isHdf5(source: RandomAccess, head: Uint8Array): Promise<boolean> {
  const matches = (bytes: Uint8Array, at: number) => signature.every((byte, i) => bytes[at + i] === byte)
  if (matches(head, 0)) return true
  for (let at = 512; at <= largestUserBlock && at + 8 <= source.size; at *= 2) {
    if (matches(await source.read(at, 8), 0)) return true
  }
  return false
}

/**
 * Open an HDF5 file as a record: every one- or two-dimensional dataset of numbers is a channel or several.
 *
 * Only the wanted slices are read. Contiguous and chunked storage, with the filters that HDF5 itself has (deflate,
 * shuffle, checksums). Call `close` when done.
 *
 * @throws RecordError `hdf5-damaged`, `hdf5-too-large`, `hdf5-empty`; on reading `hdf5-damaged`
 */
export async function openHdf5(source: RandomAccess): Promise<RecordTable> {
  const { file, close } = await openHdf5File(source)
  try {
    const { columns, passedOver } = findHdf5Columns(file)
    if (!columns.length) throw new RecordError('hdf5-empty', `The HDF5 file holds no dataset of numbers in one or two dimensions${passedOver.length ? `, only ${passedOver.slice(0, 5).map(name => `“${name}”`).join(', ')}` : ''}. Export each channel as a one-dimensional dataset.`)
    const longest = columns.reduce((a, b) => b.rows > a.rows ? b : a)
    return {
      format: 'hdf5', description: `HDF5, ${columns.length} ${columns.length === 1 ? 'channel' : 'channels'}`, close,
      columns: columns.map(({ index, name, header, unit }) => ({ index, name, header, unit })),
      rows: longest.rows, sampleRateHz: longest.sampleRateHz, startSeconds: longest.startSeconds,
      flags: passedOver.length ? [{ code: 'datasets-passed-over', severity: 'note', message: `${passedOver.length} datasets are no channels and were passed over: ${passedOver.slice(0, 5).map(name => `“${name}”`).join(', ')}.` }] : [],
      seriesOf: index => columns[index],
      blocks: (wanted, from, to) => hdf5Blocks(wanted.map(index => columns[index]), from, to),
    }
  } catch (error) {
    close()
    throw error
  }
}

async function* hdf5Blocks(columns: readonly Hdf5Column[], from: number, to: number): AsyncGenerator<Float64Array[]> {
  const step = blockRows(columns)
  // Blocks begin where chunks do, so none is unpacked twice.
  for (let start = from; start < to;) {
    const end = Math.min(to, (Math.floor(start / step) + 1) * step)
    const shared = new Map<Dataset, Values>()
    yield columns.map(column => readSlice(column, start, end, shared))
    start = end
  }
}

function blockRows(columns: readonly Hdf5Column[]): number {
  const width = Math.max(...columns.map(({ dataset, sampleAxis, channel }) => channel === null || sampleAxis === 1 ? 1 : dataset.metadata.shape![1]))
  const rows = Math.max(1, Math.floor(blockValues / width))
  const chunk = Math.max(1, ...columns.map(({ dataset, sampleAxis }) => dataset.metadata.chunks?.[sampleAxis] ?? 1))
  return Math.max(1, Math.round(rows / chunk)) * chunk
}

/** Interleaved channels of one dataset are read together, once. */
function readSlice({ dataset, sampleAxis, channel, header }: Hdf5Column, from: number, to: number, shared: Map<Dataset, Values>): Float64Array {
  try {
    if (channel === null) return toFloat64(dataset.slice([[from, to]]) as Values, 0, 1, to - from)
    if (sampleAxis === 1) return toFloat64(dataset.slice([[channel, channel + 1], [from, to]]) as Values, 0, 1, to - from)
    const width = dataset.metadata.shape![1]
    if (!shared.has(dataset)) shared.set(dataset, dataset.slice([[from, to], [0, width]]) as Values)
    return toFloat64(shared.get(dataset)!, channel, width, to - from)
  } catch (cause) {
    const filters = dataset.filters.map(({ name }) => name).join(', ')
    throw new RecordError('hdf5-damaged', `Samples ${from} to ${to} of “${header}” cannot be read: ${cause instanceof RecordError ? cause.message : lastComplaint()}${filters ? ` (stored with ${filters})` : ''}. Copy the file again, or export it without compression.`)
  }
}

function toFloat64(values: Values, first: number, stride: number, count: number): Float64Array {
  if (values.length < first + stride * (count - 1) + 1) throw new RecordError('hdf5-damaged', `${values.length} of ${count * stride} values were found`)
  const out = new Float64Array(count)
  for (let i = 0, at = first; i < count; i++, at += stride) out[i] = Number(values[at])
  return out
}
