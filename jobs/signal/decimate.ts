/** A stretch of record with fewer samples; a sine's phase about record sample 0 is kept by `origin`. */
export interface Decimated {
  samples: Float64Array
  sampleRateHz: number
  /** Position of element 0 on the decimated record's sample axis, for the sine fits' `origin`. */
  origin: number
  /** What averaging leaves of the amplitude at the given frequency. */
  gain: number
}

/**
 * Average blocks of samples so that about `samplesPerPeriod` remain in a period of `frequencyHz`: sine fits of that
 * frequency cost as much less and lose nothing (white noise averages out alike).
 *
 * @param stretch first sample and count; a last block that is not full is dropped
 * @returns block means at the blocks' middles; amplitudes fitted to them are to be divided by `gain`, the block's
 *   Dirichlet kernel sin(πfD/F) / (D·sin(πf/F)). With fewer samples than asked for, a plain copy.
 */
export function decimateStretch(samples: ArrayLike<number>, sampleRateHz: number, stretch: { first: number, count: number }, frequencyHz: number, samplesPerPeriod = 20): Decimated {
  const block = Math.max(1, Math.floor(sampleRateHz / (samplesPerPeriod * frequencyHz)))
  const count = Math.floor(stretch.count / block)
  const means = new Float64Array(count)
  for (let k = 0, i = stretch.first; k < count; k++) {
    let sum = 0
    for (const end = i + block; i < end; i++) sum += samples[i]
    means[k] = sum / block
  }
  const x = Math.PI * frequencyHz / sampleRateHz
  return {
    samples: means,
    sampleRateHz: sampleRateHz / block,
    origin: (stretch.first + (block - 1) / 2) / block,
    gain: block === 1 ? 1 : Math.sin(x * block) / (block * Math.sin(x)),
  }
}
