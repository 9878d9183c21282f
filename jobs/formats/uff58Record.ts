import { columnBlocks, type ColumnPlace, type FieldType } from './fields'
import { latin1, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import type { RecordColumn, RecordSeries, RecordTable } from './recordTable'
import { hintOf, isTimeHistory } from './uffHeader'
import { binaryBytes, scanUff, type UffDataset } from './uffScan'
import { uffTextValues } from './uffText'

interface Column extends RecordColumn {
  dataset: UffDataset
  part: 'ordinate' | 'abscissa'
}

const blockRows = 1 << 16
const secondsPerUnit: Record<string, number> = { ms: 1e-3, us: 1e-6, µs: 1e-6 }

/** A universal file begins with a line "-1" and a line with a dataset's number. */
export const isUff = (head: Uint8Array): boolean => /^\s*-1\s*\r?\n\s*\d{1,4}(?:b|\s)/i.test(latin1(head.subarray(0, 400)))

/**
 * Open a universal file as a record: every dataset 58 of real values over time is a channel, in ASCII or binary (58b,
 * either byte order, IEEE numbers), single or double precision. Other datasets are passed over.
 *
 * With an uneven abscissa the first such dataset's abscissa becomes a time column, which must turn out even; the others
 * are taken to share it when they are of one length. Names come from the first identification line where it is
 * one of its own, else from the ordinate's label and the node; units from the axes' unit labels. Layout: the published
 * description of universal dataset 58, "Function at Nodal DOF".
 *
 * @throws RecordError `uff-header`, `uff-float`, `uff-no-channels`, `file-cut`
 */
export async function openUff58(source: RandomAccess): Promise<RecordTable> {
  const { datasets, others } = await scanUff(source)
  const histories = datasets.filter(isTimeHistory)
  if (!histories.length) throw new RecordError('uff-no-channels', `The universal file holds no real time history in a dataset 58, only ${datasets.length ? `${datasets.length} functions of other kinds` : `datasets ${[...new Set(others)].slice(0, 8).join(', ') || 'without number'}`}. Export the channels’ time histories.`)
  const columns = columnsOf(histories)
  const series = columns.map(({ dataset }) => seriesOf(dataset))
  const longest = series.reduce((a, b) => b.rows > a.rows ? b : a)
  const passedOver = datasets.length - histories.length
  return {
    format: 'uff58', description: `Universal file, ${histories.length} time ${histories.length === 1 ? 'history' : 'histories'}, ${histories[0].binary ? 'binary' : 'ASCII'}`,
    columns: columns.map(({ index, name, header, unit, hint }) => ({ index, name, header, unit, ...hint && { hint } })), ...longest,
    flags: passedOver ? [{ code: 'datasets-passed-over', severity: 'note', message: `${passedOver} of ${datasets.length} functions are no real time histories and were passed over.` }] : [],
    seriesOf: index => series[index],
    blocks: (wanted, from, to) => uffBlocks(source, wanted.map(index => columns[index]), from, to),
  }
}

function seriesOf(dataset: UffDataset): RecordSeries {
  const { count, isEven, firstAbscissa, abscissa } = dataset
  const scale = secondsPerUnit[abscissa.unit ?? ''] ?? 1
  return isEven ? { rows: count, sampleRateHz: rateOf(dataset) / scale, startSeconds: scale * firstAbscissa } : { rows: count, sampleRateHz: null, startSeconds: 0 }
}

/**
 * The step is written with six digits, so 1/51200 s reads back as 51 199.87 Hz: the rate is the one with the fewest digits that
 * is written as this step.
 */
function rateOf({ step, stepTolerance }: UffDataset): number {
  for (let digits = 1; digits <= 12; digits++) {
    const rate = Number((1 / step).toPrecision(digits))
    if (Math.abs(1 / rate - step) <= stepTolerance * (1 + 1e-9)) return rate
  }
  return 1 / step
}

function columnsOf(datasets: readonly UffDataset[]): Column[] {
  const titles = datasets.map(({ title }) => title)
  const used = new Set<string>()
  const named = datasets.map((dataset, i): Column => {
    const { title, ordinate, dof, count } = dataset
    const isOwn = title !== null && titles.indexOf(title) === titles.lastIndexOf(title)
    const plain = isOwn ? title : [ordinate.label ?? title ?? (count ? `dataset ${i + 1}` : ''), dof].filter(Boolean).join(' ')
    const name = used.has(plain) ? `${plain} (${i + 1})` : plain
    used.add(name)
    return { index: i, name, header: name, unit: ordinate.unit, hint: hintOf(dataset), dataset, part: 'ordinate' }
  })
  const uneven = datasets.find(({ isEven }) => !isEven)
  if (!uneven) return named
  return [...named, { index: named.length, name: uneven.abscissa.label ?? 'abscissa', header: '', unit: uneven.abscissa.unit, hint: { role: 'time', reason: 'it is the abscissa' }, dataset: uneven, part: 'abscissa' }]
}

async function* uffBlocks(source: RandomAccess, columns: readonly Column[], from: number, to: number): AsyncGenerator<Float64Array[]> {
  const readers = columns.map(column => column.dataset.binary
    ? regroup(binaryValues(source, column, from, to), 0)
    : regroup(textValues(source, column, to), from))
  for (let row = from; row < to; row += blockRows) {
    const count = Math.min(blockRows, to - row)
    const block: Float64Array[] = []
    for (const reader of readers) block.push(await reader(count))
    yield block
  }
}

async function* binaryValues(source: RandomAccess, column: Column, from: number, to: number): AsyncGenerator<Float64Array> {
  for await (const [values] of columnBlocks(source, [placeOf(column)], from, to)) yield values
}

/** In double precision an uneven abscissa is written in four bytes or in eight: the block's length tells. */
function placeOf({ dataset, part }: Column): ColumnPlace {
  const { binary, ordinateType, isEven, count, dataOffset } = dataset
  const float = (bytes: number): FieldType => ({ kind: 'float', bytes, littleEndian: binary!.littleEndian })
  const ordinateBytes = ordinateType === 2 ? 4 : 8
  const abscissaBytes = isEven ? 0 : Math.round(binaryBytes(dataset) / Math.max(1, count)) - ordinateBytes
  const strideBytes = abscissaBytes + ordinateBytes
  if (part === 'abscissa') return { offset: dataOffset, strideBytes, type: float(abscissaBytes) }
  return { offset: dataOffset + abscissaBytes, strideBytes, type: float(ordinateBytes) }
}

async function* textValues(source: RandomAccess, { dataset, part }: Column, to: number): AsyncGenerator<Float64Array> {
  const step = dataset.isEven ? 1 : 2
  let phase = part === 'ordinate' ? step - 1 : 0
  for await (const values of uffTextValues(source, dataset, step * to)) {
    if (step === 1) yield values
    else {
      const own = values.filter((_, i) => i % 2 === phase)
      if (values.length % 2) phase = 1 - phase
      yield own
    }
  }
}

/** Values in blocks of any size → blocks of the size that is asked for, after `skip` values. */
function regroup(blocks: AsyncGenerator<Float64Array>, skip: number): (count: number) => Promise<Float64Array> {
  let held = new Float64Array(0)
  let toSkip = skip
  return async (count) => {
    const out = new Float64Array(count)
    for (let filled = 0; filled < count;) {
      if (held.length === 0) {
        const next = await blocks.next()
        if (next.done) throw new RecordError('file-cut', 'The universal file ends too early. Export or copy it again.')
        held = next.value.slice(Math.min(toSkip, next.value.length))
        toSkip -= Math.min(toSkip, next.value.length)
        continue
      }
      const part = held.subarray(0, count - filled)
      out.set(part, filled)
      filled += part.length
      held = held.subarray(part.length)
    }
    return out
  }
}
