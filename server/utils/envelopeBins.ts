/** Samples in a block of a channel's overview. */
export const blockSamples = 128

export interface Blocks {
  minimum: Float32Array
  maximum: Float32Array
}

/** The first sample of bin `index` when `samples` are cut into `bins`. */
const edgeOf = (index: number, samples: number, bins: number) => Math.floor(index * samples / bins)

/** Gathers extremes of samples that come in pieces, into bins of equal length. Values that are no numbers are passed over. */
export class EnvelopeBuilder implements Blocks {
  readonly minimum: Float32Array
  readonly maximum: Float32Array
  private position = 0
  private bin = 0

  /** `binSamples`: every bin but the last has exactly so many samples. */
  constructor(private readonly samples: number, private readonly bins: number, private readonly binSamples?: number) {
    this.minimum = new Float32Array(bins).fill(Number.NaN)
    this.maximum = new Float32Array(bins).fill(Number.NaN)
  }

  add(values: Float32Array): void {
    let from = 0
    while (from < values.length && this.bin < this.bins) {
      const binEnd = this.endOf(this.bin)
      const to = Math.min(values.length, from + binEnd - this.position)
      this.widen(values, from, to)
      this.position += to - from
      from = to
      if (this.position >= binEnd) this.bin++
    }
  }

  private endOf = (bin: number) => this.binSamples ? Math.min(this.samples, (bin + 1) * this.binSamples) : edgeOf(bin + 1, this.samples, this.bins)

  private widen(values: Float32Array, from: number, to: number): void {
    let low = Number.isNaN(this.minimum[this.bin]) ? Infinity : this.minimum[this.bin]!
    let high = Number.isNaN(this.maximum[this.bin]) ? -Infinity : this.maximum[this.bin]!
    for (let i = from; i < to; i++) {
      const value = values[i]!
      if (value < low) low = value
      if (value > high) high = value
    }
    if (low > high) return
    this.minimum[this.bin] = low
    this.maximum[this.bin] = high
  }
}

/** Bins out of an overview. Their edges move to the nearest block, so use it for bins of many blocks only. */
export function envelopeFromBlocks({ minimum, maximum }: Blocks, first: number, end: number, bins: number): Blocks {
  const builders = { minimum: new Float32Array(bins), maximum: new Float32Array(bins) }
  const blockAt = (sample: number) => Math.min(minimum.length, Math.round(sample / blockSamples))
  for (let bin = 0; bin < bins; bin++) {
    const from = blockAt(first + edgeOf(bin, end - first, bins))
    const to = bin === bins - 1 && end > (minimum.length - 1) * blockSamples ? minimum.length : blockAt(first + edgeOf(bin + 1, end - first, bins))
    reduceBlocks({ minimum, maximum }, from, to, builders, bin)
  }
  return builders
}

/** Overviews are long: plain loops, no calls per block. */
function reduceBlocks({ minimum, maximum }: Blocks, from: number, to: number, into: Blocks, bin: number): void {
  let low = Infinity
  let high = -Infinity
  for (let i = from; i < to; i++) {
    if (minimum[i]! < low) low = minimum[i]!
    if (maximum[i]! > high) high = maximum[i]!
  }
  into.minimum[bin] = low <= high ? low : Number.NaN
  into.maximum[bin] = low <= high ? high : Number.NaN
}
