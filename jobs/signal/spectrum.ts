/**
 * In-place radix-2 fast Fourier transform, forward sign e^{−j2πkn/N}, no scaling.
 *
 * @param re,im real and imaginary parts, equal length, a power of two
 * @throws RangeError when the lengths differ or are no power of two
 * Source: Cooley & Tukey (1965).
 */
export function fft(re: Float64Array, im: Float64Array): void {
  const n = re.length
  if (im.length !== n || n < 1 || (n & (n - 1)) !== 0) throw new RangeError('The transform needs two arrays of equal length, a power of two.')
  bitReverse(re, im)
  const { cos, sin } = twiddles(n)
  for (let size = 2; size <= n; size *= 2) {
    const half = size / 2
    const stride = n / size
    for (let start = 0; start < n; start += size) {
      for (let k = 0, t = 0; k < half; k++, t += stride) {
        const low = start + k
        const high = low + half
        const real = re[high] * cos[t] + im[high] * sin[t]
        const imaginary = im[high] * cos[t] - re[high] * sin[t]
        re[high] = re[low] - real
        im[high] = im[low] - imaginary
        re[low] += real
        im[low] += imaginary
      }
    }
  }
}

/** Inverse of `fft`, scaled by 1/N. */
export function inverseFft(re: Float64Array, im: Float64Array): void {
  fft(im, re)
  const scale = 1 / re.length
  for (let k = 0; k < re.length; k++) {
    re[k] *= scale
    im[k] *= scale
  }
}

const twiddleCache = new Map<number, { cos: Float64Array, sin: Float64Array }>()

function twiddles(n: number) {
  const kept = twiddleCache.get(n)
  if (kept) return kept
  const cos = new Float64Array(n / 2)
  const sin = new Float64Array(n / 2)
  for (let k = 0; k < n / 2; k++) {
    cos[k] = Math.cos(2 * Math.PI * k / n)
    sin[k] = Math.sin(2 * Math.PI * k / n)
  }
  const made = { cos, sin }
  if (twiddleCache.size > 8) twiddleCache.clear()
  twiddleCache.set(n, made)
  return made
}

function bitReverse(re: Float64Array, im: Float64Array): void {
  const n = re.length
  for (let i = 1, j = 0; i < n; i++) {
    let bit = n >> 1
    for (; j & bit; bit >>= 1) j ^= bit
    j ^= bit
    if (i < j) {
      const real = re[i]
      re[i] = re[j]
      re[j] = real
      const imaginary = im[i]
      im[i] = im[j]
      im[j] = imaginary
    }
  }
}

/** Smallest power of two that is at least n. */
export function powerOfTwo(n: number): number {
  let power = 1
  while (power < n) power *= 2
  return power
}

export interface Tone {
  frequencyHz: number
  /** Amplitude of the sine, in the samples' unit. */
  amplitude: number
}

/**
 * The strongest tone of a stretch: mean removed, Hann window, zero-padded spectrum, peak interpolated by a parabola
 * through the logarithms of three bins (error about a hundredth of 1/duration for a clean tone of three periods or more).
 *
 * @param samples the record
 * @param sampleRateHz samples a second
 * @param range first sample and count; at most 65 536 samples are used, `minimumHz` (default 1.5 / duration) bounds below
 * @returns null when the stretch has fewer than 8 samples or nothing above zero
 */
export function dominantTone(samples: ArrayLike<number>, sampleRateHz: number, range: { first: number, count: number, minimumHz?: number }): Tone | null {
  const count = Math.min(range.count, 65_536, samples.length - range.first)
  if (count < 8) return null
  const size = powerOfTwo(count) * 2
  const re = new Float64Array(size)
  const im = new Float64Array(size)
  let mean = 0
  for (let k = 0; k < count; k++) mean += samples[range.first + k]
  mean /= count
  for (let k = 0; k < count; k++) re[k] = (samples[range.first + k] - mean) * (0.5 - 0.5 * Math.cos(2 * Math.PI * (k + 0.5) / count))
  fft(re, im)
  const minimumHz = range.minimumHz ?? 1.5 * sampleRateHz / count
  const lowest = Math.max(1, Math.ceil(minimumHz * size / sampleRateHz))
  let peak = -1
  let power = 0
  for (let k = lowest; k < size / 2; k++) {
    const value = re[k] * re[k] + im[k] * im[k]
    if (value > power) {
      power = value
      peak = k
    }
  }
  if (peak < 0) return null
  const log = (k: number) => Math.log(re[k] * re[k] + im[k] * im[k] + Number.MIN_VALUE)
  const left = log(peak - 1), centre = log(peak), right = log(peak + 1)
  const curve = left - 2 * centre + right
  const shift = curve < 0 ? Math.max(-0.5, Math.min(0.5, 0.5 * (left - right) / curve)) : 0
  return { frequencyHz: (peak + shift) * sampleRateHz / size, amplitude: 4 * Math.sqrt(power) / count }
}
