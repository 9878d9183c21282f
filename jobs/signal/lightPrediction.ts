/** Running integrals of a lamp signal; made by `createLightIntegrals`. */
export interface LightIntegrals {
  illumination: Float32Array
  sampleRateHz: number
  darkLevel: number
  /** Integral from sample 0 to sample k·stride, in signal units × samples, dark level subtracted. */
  sums: Float64Array
}

const stride = 4

/**
 * Running trapezoid integrals of a record, so that the mean over any window costs the same however long it is.
 *
 * @param illumination lamp signal, any unit; NaN poisons every window after it
 * @param sampleRateHz samples a second
 * @param darkLevel subtracted from every sample; null counts as 0
 * @returns sums at every fourth sample in double precision (2 bytes a sample)
 */
export function createLightIntegrals(illumination: Float32Array, sampleRateHz: number, darkLevel: number | null = null): LightIntegrals {
  const dark = darkLevel ?? 0
  const sums = new Float64Array(Math.floor(Math.max(illumination.length - 1, 0) / stride) + 1)
  let sum = 0
  for (let i = 1; i < illumination.length; i++) {
    sum += (illumination[i - 1] + illumination[i]) / 2 - dark
    if (i % stride === 0) sums[i / stride] = sum
  }
  return { illumination, sampleRateHz, darkLevel: dark, sums }
}

/** Lamp signal at a record time, dark level subtracted, linear between samples; NaN outside of the record. */
export function lightAt(integrals: LightIntegrals, seconds: number): number {
  const { illumination, darkLevel } = integrals
  const x = seconds * integrals.sampleRateHz
  const last = illumination.length - 1
  if (!(x >= -1e-6 && x <= last + 1e-6) || last < 1) return Number.NaN
  const i = Math.min(Math.max(Math.floor(x), 0), last - 1)
  return illumination[i] + (illumination[i + 1] - illumination[i]) * (x - i) - darkLevel
}

/** Integral from sample 0 to position x (in samples), in unit × samples; x must lie in [0, last]. */
function integralTo(integrals: LightIntegrals, x: number): number {
  const { illumination, darkLevel, sums } = integrals
  const i = Math.min(Math.floor(x), illumination.length - 2)
  const block = Math.floor(i / stride)
  let sum = 0
  let previous = illumination[block * stride]
  for (let k = block * stride + 1; k <= i; k++) {
    const next = illumination[k]
    sum += previous + next
    previous = next
  }
  const part = x - i
  const slope = illumination[i + 1] - previous
  return sums[block] + sum / 2 - darkLevel * (i - block * stride) + part * (previous - darkLevel + slope * part / 2)
}

/**
 * Mean of the lamp signal over [startSeconds, startSeconds + exposureSeconds], dark level subtracted.
 *
 * Exact for the signal that is linear between samples. NaN when the window leaves the record (by more than a millionth
 * of a sample) or when the exposure is not above 0.
 */
export function windowMean(integrals: LightIntegrals, startSeconds: number, exposureSeconds: number): number {
  const last = integrals.illumination.length - 1
  const from = startSeconds * integrals.sampleRateHz
  const to = (startSeconds + exposureSeconds) * integrals.sampleRateHz
  if (!(from >= -1e-6 && to <= last + 1e-6 && exposureSeconds > 0) || last < 1) return Number.NaN
  return (integralTo(integrals, Math.min(to, last)) - integralTo(integrals, Math.max(from, 0))) / (to - from)
}

export interface FrameTiming {
  /** Clip time at which each frame's exposure starts. */
  frameTimesSeconds: ArrayLike<number>
  exposureSeconds: number
  offsetSeconds: number
  driftPpm: number
}

/** Record time at which frame `frame`'s exposure starts: offset + (1 + drift)·clip time. */
export function recordTimeOf(timing: FrameTiming, frame: number): number {
  return timing.offsetSeconds + (1 + timing.driftPpm * 1e-6) * timing.frameTimesSeconds[frame]
}

/**
 * Mean lamp signal over every frame's exposure, dark level subtracted, in record units.
 *
 * Frame light is then `gain · prediction + background`. The exposure is taken as record time (a drift of 100 ppm changes
 * it by 0.01 %). NaN for frames whose window leaves the record.
 */
export function predictFrameLight(integrals: LightIntegrals, timing: FrameTiming): Float64Array {
  const predicted = new Float64Array(timing.frameTimesSeconds.length)
  for (let frame = 0; frame < predicted.length; frame++) {
    predicted[frame] = windowMean(integrals, recordTimeOf(timing, frame), timing.exposureSeconds)
  }
  return predicted
}
