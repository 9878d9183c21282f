/** One step of a pyramid. */
export interface PyramidLevel {
  samplesPerBin: number
  bins: number
  /** Where its pairs begin, counted in pairs from the pyramid's first. */
  firstPair: number
}

export interface PyramidLayout {
  samples: number
  /** Finest first. */
  levels: PyramidLevel[]
  /** Of all levels together; a pair is eight bytes in a file. */
  pairs: number
}

/** A stretch of samples (level −1) or of a level's bins that an envelope is made of. */
export interface EnvelopeSpan {
  level: number
  from: number
  to: number
}

export interface EnvelopePlan {
  /** Of columns + 1 samples: column i holds those from `edges[i]` to before `edges[i + 1]`. */
  edges: Float64Array
  spans: EnvelopeSpan[]
}

const finestBin = 16
/** Bins of a level that make one of the next. */
export const levelFactor = 4
/** Fewest bins in a column: its edges move by half a bin at most, an eighth of its width. */
const binsPerColumn = 4

/** Where the levels of a pyramid lie. It depends on the number of samples only, so a file of pairs needs no header. */
export function pyramidLayout(samples: number): PyramidLayout {
  const levels: PyramidLevel[] = []
  let firstPair = 0
  for (let samplesPerBin = finestBin; samples > 0; samplesPerBin *= levelFactor) {
    const bins = Math.ceil(samples / samplesPerBin)
    levels.push({ samplesPerBin, bins, firstPair })
    firstPair += bins
    if (bins === 1) break
  }
  return { samples, levels, pairs: firstPair }
}

export const samplesPerEntry = ({ levels }: PyramidLayout, level: number): number => level < 0 ? 1 : levels[level].samplesPerBin

/**
 * What has to be read for an envelope: one long span of the coarsest level that has four bins or more in every column,
 * and short ones of ever finer levels at both ends, where `from` and `to` lie within bins.
 */
export function planEnvelope(layout: PyramidLayout, from: number, to: number, columns: number): EnvelopePlan {
  const end = Math.max(0, Math.min(layout.samples, Math.floor(to)))
  const start = Math.min(end, Math.max(0, Math.floor(from)))
  const count = Math.max(0, Math.min(Math.floor(columns), end - start))
  const width = count ? (end - start) / count : 0
  const level = layout.levels.findLastIndex(({ samplesPerBin }) => samplesPerBin * binsPerColumn <= width)
  const step = samplesPerEntry(layout, level)
  const edges = Float64Array.from({ length: count + 1 }, (_, i) => i === 0 ? start : i === count ? end : level < 0 ? Math.floor(start + i * width) : step * Math.round((start + i * width) / step))
  return { edges, spans: count ? spansOf(layout, start, end, level) : [] }
}

function spansOf(layout: PyramidLayout, start: number, end: number, level: number): EnvelopeSpan[] {
  const before: EnvelopeSpan[] = []
  const after: EnvelopeSpan[] = []
  let [low, high] = [start, end]
  for (let fine = -1; fine < level; fine++) {
    const size = samplesPerEntry(layout, fine)
    const coarse = samplesPerEntry(layout, fine + 1)
    const nextLow = coarse * Math.ceil(low / coarse)
    // The channel's last bin is whole, however few samples it has.
    const nextHigh = high === layout.samples ? high : coarse * Math.floor(high / coarse)
    if (nextLow > low) before.push({ level: fine, from: low / size, to: nextLow / size })
    if (nextHigh < high) after.unshift({ level: fine, from: nextHigh / size, to: Math.ceil(high / size) })
    ;[low, high] = [nextLow, nextHigh]
  }
  const size = samplesPerEntry(layout, level)
  return [...before, { level, from: low / size, to: Math.ceil(high / size) }, ...after]
}
