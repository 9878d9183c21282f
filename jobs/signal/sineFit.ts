import { solveLinear } from './linearSolve'

/** The stretch is too short, the frequency out of range, or the refinement ran away. */
export class SineFitError extends Error {
  override name = 'SineFitError'
}

/** `value(t) = offset + sine·sin(ωt) + cosine·cos(ωt)`, t from sample 0 of the whole array. */
export interface SineFit {
  frequencyHz: number
  sine: number
  cosine: number
  offset: number
  amplitude: number
  /** φ of amplitude·sin(ωt + φ), degrees in (−180, 180]. */
  phaseDeg: number
  rmsResidual: number
}

export interface SineFit4 extends SineFit {
  iterations: number
}

export interface Stretch {
  /** First sample of the stretch, default 0. */
  first?: number
  /** Number of samples, default all that follow `first`. */
  count?: number
  /** Record sample that element 0 of the array is, default 0: time and phase count from record sample 0. */
  origin?: number
}

/** Degrees brought into (−180, 180]. */
export function wrapDegrees(degrees: number): number {
  const wrapped = degrees - 360 * Math.round(degrees / 360)
  return wrapped <= -180 ? wrapped + 360 : wrapped
}

const resyncEvery = 256

/** Calls `visit(i, cos, sin, u)` for each sample of the stretch; angle and u (−1…1) count from its middle. */
function walk(first: number, count: number, radiansPerSample: number, visit: (index: number, cos: number, sin: number, u: number) => void): void {
  const middle = first + (count - 1) / 2
  const half = Math.max((count - 1) / 2, 1)
  const cosStep = Math.cos(radiansPerSample)
  const sinStep = Math.sin(radiansPerSample)
  let cos = 1
  let sin = 0
  for (let k = 0; k < count; k++) {
    const index = first + k
    if (k % resyncEvery === 0) {
      const angle = radiansPerSample * (index - middle)
      cos = Math.cos(angle)
      sin = Math.sin(angle)
    }
    visit(index, cos, sin, (index - middle) / half)
    const next = cos * cosStep - sin * sinStep
    sin = sin * cosStep + cos * sinStep
    cos = next
  }
}

function bounds(samples: ArrayLike<number>, sampleRateHz: number, frequencyHz: number, stretch: Stretch, parameters: number) {
  const first = stretch.first ?? 0
  const count = stretch.count ?? samples.length - first
  if (first < 0 || first + count > samples.length) throw new SineFitError('The stretch to fit lies outside of the record.')
  if (count < parameters + 1) throw new SineFitError(`A sine fit needs at least ${parameters + 1} samples, the stretch has ${count}.`)
  if (!(frequencyHz > 0 && frequencyHz < sampleRateHz / 2)) {
    throw new SineFitError(`A sine of ${frequencyHz} Hz cannot be fitted at ${sampleRateHz} samples a second: it must lie between 0 and half the sample rate.`)
  }
  return { first, count, origin: stretch.origin ?? 0 }
}

function squaredError(samples: ArrayLike<number>, first: number, count: number, radiansPerSample: number, model: { a: number, b: number, offset: number }): number {
  const { a, b, offset } = model
  const cosStep = Math.cos(radiansPerSample)
  const sinStep = Math.sin(radiansPerSample)
  let squares = 0
  let cos = 1, sin = 0
  for (let k = 0; k < count; k++) {
    if (k % resyncEvery === 0) {
      const angle = radiansPerSample * (k - (count - 1) / 2)
      cos = Math.cos(angle)
      sin = Math.sin(angle)
    }
    const error = samples[first + k] - offset - a * cos - b * sin
    squares += error * error
    const next = cos * cosStep - sin * sinStep
    sin = sin * cosStep + cos * sinStep
    cos = next
  }
  return squares
}

/** cosine and sine coefficients about the stretch's middle → a `SineFit` about sample 0. */
function describe(samples: ArrayLike<number>, sampleRateHz: number, frequencyHz: number, { first, count, origin }: Required<Stretch>, middle: { a: number, b: number, offset: number }): SineFit {
  const { a, b, offset } = middle
  const radiansPerSample = 2 * Math.PI * frequencyHz / sampleRateHz
  const squares = squaredError(samples, first, count, radiansPerSample, middle)
  const angle = radiansPerSample * (origin + first + (count - 1) / 2)
  const cosine = a * Math.cos(angle) - b * Math.sin(angle)
  const sine = a * Math.sin(angle) + b * Math.cos(angle)
  return {
    frequencyHz, sine, cosine, offset,
    amplitude: Math.hypot(sine, cosine),
    phaseDeg: wrapDegrees(Math.atan2(cosine, sine) * 180 / Math.PI),
    rmsResidual: Math.sqrt(squares / count),
  }
}

function solveMiddle(samples: ArrayLike<number>, first: number, count: number, radiansPerSample: number) {
  // Values are taken about the first sample so that a large offset costs no digits.
  const base = samples[first]
  const cosStep = Math.cos(radiansPerSample)
  const sinStep = Math.sin(radiansPerSample)
  let c = 0, s = 0, cc = 0, cs = 0, ss = 0, y = 0, yc = 0, ys = 0
  let cos = 1, sin = 0
  for (let k = 0; k < count; k++) {
    if (k % resyncEvery === 0) {
      const angle = radiansPerSample * (k - (count - 1) / 2)
      cos = Math.cos(angle)
      sin = Math.sin(angle)
    }
    const value = samples[first + k] - base
    c += cos
    s += sin
    cc += cos * cos
    cs += cos * sin
    ss += sin * sin
    y += value
    yc += value * cos
    ys += value * sin
    const next = cos * cosStep - sin * sinStep
    sin = sin * cosStep + cos * sinStep
    cos = next
  }
  const x = solveLinear([cc, cs, c, cs, ss, s, c, s, count], [yc, ys, y])
  if (!x) throw new SineFitError('The stretch is too short for its frequency: sine, cosine and offset cannot be told apart.')
  return { a: x[0], b: x[1], offset: x[2] + base }
}

/**
 * Three-parameter (known frequency) least-squares sine fit.
 *
 * @param samples any real samples; NaN in the stretch gives NaN results
 * @param sampleRateHz samples a second
 * @param frequencyHz known frequency, 0 < f < sampleRateHz / 2
 * @param stretch first sample and number of samples to use; default all
 * @returns coefficients about t = 0 at sample 0 of the *whole* array, phase of sin(ωt + φ), rms residual (over n)
 * @throws SineFitError when the stretch is outside of the array, shorter than 4 samples, or too short to separate
 *   sine, cosine and offset
 * Source: IEEE Std 1057, annex A (three-parameter fit).
 */
export function fitSine3(samples: ArrayLike<number>, sampleRateHz: number, frequencyHz: number, stretch: Stretch = {}): SineFit {
  const used = bounds(samples, sampleRateHz, frequencyHz, stretch, 3)
  const middle = solveMiddle(samples, used.first, used.count, 2 * Math.PI * frequencyHz / sampleRateHz)
  return describe(samples, sampleRateHz, frequencyHz, used, middle)
}

/** One Gauss–Newton step of the four-parameter fit: the change of radians per sample. */
function frequencyStep(samples: ArrayLike<number>, first: number, count: number, radiansPerSample: number): number {
  const { a, b, offset } = solveMiddle(samples, first, count, radiansPerSample)
  const normal = new Float64Array(16)
  const right = new Float64Array(4)
  const row = new Float64Array(4)
  walk(first, count, radiansPerSample, (index, cos, sin, u) => {
    row[0] = cos
    row[1] = sin
    row[2] = 1
    row[3] = u * (b * cos - a * sin)
    const error = samples[index] - offset - a * cos - b * sin
    for (let i = 0; i < 4; i++) {
      right[i] += row[i] * error
      for (let j = i; j < 4; j++) normal[i * 4 + j] += row[i] * row[j]
    }
  })
  for (let i = 1; i < 4; i++) for (let j = 0; j < i; j++) normal[i * 4 + j] = normal[j * 4 + i]
  const step = solveLinear(normal, right)
  if (!step) throw new SineFitError('The stretch holds no sine whose frequency could be refined.')
  return step[3] / Math.max((count - 1) / 2, 1)
}

/**
 * Four-parameter least-squares sine fit: frequency refined by Gauss–Newton from an initial guess.
 *
 * Converges when the guess is good to about half a cycle over the stretch (|f − guess| < 0.5 / duration); a windowed,
 * interpolated spectrum peak (`dominantTone`) is. With white noise the frequency's standard deviation is
 * √6·σ / (π·T·A·√n), T duration, n samples.
 *
 * @throws SineFitError as `fitSine3`, and when the frequency leaves guess ± 1.5 / duration (no sine near the guess, or a
 *   bad guess) or has not settled after 30 steps
 * Source: IEEE Std 1057, annex A (four-parameter fit).
 */
export function fitSine4(samples: ArrayLike<number>, sampleRateHz: number, guessHz: number, stretch: Stretch = {}): SineFit4 {
  const used = bounds(samples, sampleRateHz, guessHz, stretch, 4)
  const { first, count } = used
  const toHz = sampleRateHz / (2 * Math.PI)
  const resolutionHz = sampleRateHz / count
  let radians = guessHz / toHz
  for (let iterations = 1; iterations <= 30; iterations++) {
    const step = frequencyStep(samples, first, count, radians)
    radians += step
    const frequencyHz = radians * toHz
    if (!(Math.abs(frequencyHz - guessHz) < 1.5 * resolutionHz) || frequencyHz <= 0 || frequencyHz >= sampleRateHz / 2) {
      throw new SineFitError(`No sine was found near ${guessHz} Hz: the fit ran away from its first guess.`)
    }
    if (Math.abs(step) * count < 1e-8) {
      const middle = solveMiddle(samples, first, count, radians)
      return { ...describe(samples, sampleRateHz, frequencyHz, used, middle), iterations }
    }
  }
  throw new SineFitError(`The sine fit near ${guessHz} Hz did not settle in 30 steps.`)
}

/**
 * Standard deviation of a fitted frequency in Hz under white noise (the Cramér–Rao bound, Rife & Boorstyn 1974):
 * √6·σ / (π·T·A·√n).
 */
export function frequencyDeviationHz(fit: SineFit, count: number, sampleRateHz: number): number {
  return Math.sqrt(6 / count) * fit.rmsResidual * sampleRateHz / (Math.PI * count * fit.amplitude)
}
