import { fft, inverseFft } from './spectrum'

/** Overlap searched, as a share of the measured frames. */
const leastOverlap = 0.2

/**
 * Scores of every lag between a light measured in a few places only and predictions of it, by masked normalised
 * cross-correlation (Padfield 2012): the sums over the measured places at each lag come from transforms.
 *
 * @param values light on a uniform grid, mean removed; anything where not measured
 * @param measured 1 where it was measured, 0 elsewhere
 * @param size length of the transforms, at least that of light and longest prediction together
 * @returns a function that visits every lag with enough overlap and a positive gain; lag l puts light sample 0 on
 *   prediction sample l, the score is that of `explained`
 */
export function sparseScan(values: Float64Array, measured: Uint8Array, size: number) {
  const n = values.length
  const light = { re: new Float64Array(size), im: new Float64Array(size) }
  const mask = { re: new Float64Array(size), im: new Float64Array(size) }
  let total = 0
  let squares = 0
  for (let k = 0; k < n; k++) {
    if (!measured[k]) continue
    light.re[k] = values[k]
    light.im[k] = values[k] * values[k]
    mask.re[k] = 1
    total++
    squares += values[k] * values[k]
  }
  // Sums of light and its squares depend on which frames overlap, hence on the lag too.
  const running = { count: new Float64Array(n + 1), sum: new Float64Array(n + 1), squares: new Float64Array(n + 1) }
  for (let k = 0; k < n; k++) {
    running.count[k + 1] = running.count[k] + mask.re[k]
    running.sum[k + 1] = running.sum[k] + light.re[k]
    running.squares[k + 1] = running.squares[k] + light.im[k]
  }
  light.im.fill(0)
  fft(light.re, light.im)
  fft(mask.re, mask.im)
  const signal = { re: new Float64Array(size), im: new Float64Array(size) }
  const sums = { re: new Float64Array(size), im: new Float64Array(size) }
  const products = { re: new Float64Array(size), im: new Float64Array(size) }
  const floor = 1e-6 * squares / total + Number.MIN_VALUE
  const least = Math.max(12, leastOverlap * total)
  return (predicted: Float64Array, visit: (lag: number, score: number) => void): void => {
    const m = predicted.length
    let centre = 0
    for (let j = 0; j < m; j++) centre += predicted[j] / m
    signal.re.fill(0)
    signal.im.fill(0)
    for (let j = 0; j < m; j++) {
      const value = predicted[j] - centre
      signal.re[j] = value
      signal.im[j] = value * value
    }
    fft(signal.re, signal.im)
    correlate(signal, mask, sums)
    correlate(signal, light, products)
    for (let lag = -n + 1; lag < m; lag++) {
      const from = Math.max(0, -lag)
      const to = Math.min(n, m - lag)
      const count = running.count[to] - running.count[from]
      if (count < least) continue
      const at = lag < 0 ? lag + size : lag
      const y = running.sum[to] - running.sum[from]
      const sww = sums.im[at] - sums.re[at] * sums.re[at] / count
      const swy = products.re[at] - sums.re[at] * y / count
      if (swy <= 0 || !(sww > 1e-9 * Math.abs(sums.im[at]))) continue
      const syy = running.squares[to] - running.squares[from] - y * y / count
      visit(lag, 0.5 * count * Math.log((syy + floor * count) / (Math.max(0, syy - swy * swy / sww) + floor * count)) / total)
    }
  }
}

interface Spectrum {
  re: Float64Array
  im: Float64Array
}

/** Correlation of a complex signal with a real one, Σ_k real[k]·signal[k + lag], lag modulo the length. */
function correlate(signal: Spectrum, real: Spectrum, out: Spectrum): void {
  for (let k = 0; k < out.re.length; k++) {
    out.re[k] = signal.re[k] * real.re[k] + signal.im[k] * real.im[k]
    out.im[k] = signal.im[k] * real.re[k] - signal.re[k] * real.im[k]
  }
  inverseFft(out.re, out.im)
}
