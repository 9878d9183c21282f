export interface Envelope {
  /** Of columns + 1 samples: column i holds those from `edges[i]` to before `edges[i + 1]`. */
  edges: Float64Array
  minimum: Float32Array
  maximum: Float32Array
}

/** Gathers extremes into columns; entries are values, or pairs of minimum and maximum that stand for several samples. */
export class EnvelopeColumns implements Envelope {
  readonly minimum: Float32Array
  readonly maximum: Float32Array
  private column = 0

  constructor(readonly edges: Float64Array) {
    this.minimum = new Float32Array(edges.length - 1).fill(Infinity)
    this.maximum = new Float32Array(edges.length - 1).fill(-Infinity)
  }

  /**
   * In order of samples.
   *
   * @param first the first entry's number, counted in entries of `samplesPerEntry` from the channel's start
   */
  add(entries: Float32Array, width: 1 | 2, first: number, samplesPerEntry: number): void {
    const count = entries.length / width
    for (let at = 0; at < count;) {
      while (this.edges[this.column + 1] <= (first + at) * samplesPerEntry) this.column++
      const end = Math.min(count, Math.ceil(this.edges[this.column + 1] / samplesPerEntry) - first)
      this.widen(entries, width, at, end)
      at = end
    }
  }

  private widen(entries: Float32Array, width: 1 | 2, from: number, to: number): void {
    let low = this.minimum[this.column]
    let high = this.maximum[this.column]
    for (let i = from; i < to; i++) {
      const small = entries[i * width]
      const large = entries[i * width + width - 1]
      if (small < low) low = small
      if (large > high) high = large
    }
    this.minimum[this.column] = low
    this.maximum[this.column] = high
  }

  /** Columns of nothing but NaN become NaN. */
  finish(): Envelope {
    const { edges, minimum, maximum } = this
    for (let i = 0; i < minimum.length; i++) if (minimum[i] > maximum[i]) minimum[i] = maximum[i] = Number.NaN
    return { edges, minimum, maximum }
  }
}
