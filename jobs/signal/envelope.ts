import type { RandomAccess } from '../formats/randomAccess'
import { EnvelopeColumns, type Envelope } from './envelopeColumns'
import { levelFactor, planEnvelope, pyramidLayout, samplesPerEntry, type EnvelopeSpan, type PyramidLayout } from './envelopeLayout'

export { pyramidLayout } from './envelopeLayout'
export type { Envelope } from './envelopeColumns'
export type { PyramidLayout, PyramidLevel } from './envelopeLayout'

/** Extremes of a channel at coarser and coarser steps. */
export interface Pyramid {
  layout: PyramidLayout
  /** All levels one after another, finest first: minimum, maximum, minimum, maximum … */
  pairs: Float32Array
}

/** A channel and its pyramid as files of little-endian float32. */
export interface StoredChannel {
  samples: number
  data: RandomAccess
  /** The bytes of `Pyramid.pairs`. */
  pyramid: RandomAccess
}

/**
 * Build the min/max pyramid of a channel.
 *
 * The finest level has one pair for 16 samples, each further level one pair for four bins of the level below; the last
 * has a single pair. Values that are NaN are passed over; a bin of nothing else is NaN. A sixth of the channel's own size.
 * `pairs` is what is stored: its little-endian bytes are the file that `readEnvelope` reads.
 *
 * @param data the channel, any length
 */
export function buildPyramid(data: Float32Array): Pyramid {
  const layout = pyramidLayout(data.length)
  const pairs = new Float32Array(2 * layout.pairs)
  layout.levels.forEach(({ firstPair, bins, samplesPerBin }, i) => {
    const level = pairs.subarray(2 * firstPair, 2 * (firstPair + bins))
    if (i === 0) reduce(data, 1, samplesPerBin, level)
    else reduce(pairs.subarray(2 * layout.levels[i - 1].firstPair, 2 * firstPair), 2, levelFactor, level)
  })
  return { layout, pairs }
}

/** Extremes of every `group` entries; an entry is one value, or a pair of minimum and maximum. */
function reduce(entries: Float32Array, width: 1 | 2, group: number, into: Float32Array): void {
  const count = entries.length / width
  for (let bin = 0, at = 0; at < count; bin++) {
    const end = Math.min(count, at + group)
    let low = Infinity
    let high = -Infinity
    for (; at < end; at++) {
      const small = entries[at * width]
      const large = entries[at * width + width - 1]
      if (small < low) low = small
      if (large > high) high = large
    }
    into[2 * bin] = low <= high ? low : Number.NaN
    into[2 * bin + 1] = low <= high ? high : Number.NaN
  }
}

/**
 * The smallest and largest value of a channel in each of at most `columns` stretches of samples `from` to before `to`.
 *
 * Every stretch is exact: the very extremes of its samples from `edges[i]` to before `edges[i + 1]`, so no peak is ever
 * lost. The edges are those of columns of equal width; where a column holds 64 samples or more they are moved to the
 * nearest bin of the pyramid, by an eighth of a column at most; the outermost ones are never moved.
 *
 * @param from first sample, clipped to the channel
 * @param to one past the last sample
 * @returns fewer columns when there are fewer samples; NaN where all values of a stretch are
 */
export function envelope({ layout, pairs }: Pyramid, data: Float32Array, from: number, to: number, columns: number): Envelope {
  const { edges, spans } = planEnvelope(layout, from, to, columns)
  const out = new EnvelopeColumns(edges)
  for (const span of spans) {
    const first = span.level < 0 ? 0 : layout.levels[span.level].firstPair
    const entries = span.level < 0 ? data.subarray(span.from, span.to) : pairs.subarray(2 * (first + span.from), 2 * (first + span.to))
    out.add(entries, span.level < 0 ? 1 : 2, span.from, samplesPerEntry(layout, span.level))
  }
  return out.finish()
}

/**
 * `envelope` from files: the same result, reading at most 256 bytes a column and a few more at the ends.
 *
 * @throws what the files' `read` throws; RangeError when a file is shorter than `samples` need
 */
export async function readEnvelope({ samples, data, pyramid }: StoredChannel, from: number, to: number, columns: number): Promise<Envelope> {
  const layout = pyramidLayout(samples)
  const { edges, spans } = planEnvelope(layout, from, to, columns)
  const out = new EnvelopeColumns(edges)
  const parts = await Promise.all(spans.map(span => readSpan(span, layout, data, pyramid)))
  spans.forEach(({ level, from: first }, i) => out.add(parts[i], level < 0 ? 1 : 2, first, samplesPerEntry(layout, level)))
  return out.finish()
}

async function readSpan({ level, from, to }: EnvelopeSpan, layout: PyramidLayout, data: RandomAccess, pyramid: RandomAccess): Promise<Float32Array> {
  const [file, offset, length] = level < 0 ? [data, 4 * from, 4 * (to - from)] : [pyramid, 8 * (layout.levels[level].firstPair + from), 8 * (to - from)]
  const bytes = await file.read(offset, length)
  if (bytes.length < length) throw new RangeError(`The ${level < 0 ? 'channel' : 'pyramid'} ends at byte ${offset + bytes.length}, but ${layout.samples} samples need more. Read the record again.`)
  const copy = new Uint8Array(length)
  copy.set(bytes)
  return new Float32Array(copy.buffer)
}
