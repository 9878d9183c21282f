import { fitSine4, SineFitError } from './sineFit'
import { dominantTone } from './spectrum'

export interface LampTone {
  frequencyHz: number
  /** Amplitude over the record's highest level, about depth × relative level. */
  relativeAmplitude: number
}

/** Smallest amplitude of a tone, relative to the highest level. */
const least = 0.05
/** Sample rate at which tones are looked for. */
const enoughHz = 8000

/**
 * The lamp's tones in a record at a glance: the dominant tone of up to 64 stretches of 0.25 s spread over it, those within
 * 1 % merged, those of less than three periods or 5 % of the highest level left out. Samples are averaged to about
 * 8 kHz first; faster tones leave no beat in a frame. Good to about 0.05 Hz; use `findRegimes` for the measurement.
 */
export function lampTones(illumination: Float32Array, sampleRateHz: number): LampTone[] {
  const block = Math.max(1, Math.floor(sampleRateHz / enoughHz))
  const count = Math.min(illumination.length, Math.max(64, Math.round(0.25 * sampleRateHz)))
  const stretches = Math.max(1, Math.min(64, Math.floor(illumination.length / count)))
  const found: LampTone[] = []
  let scale = 0
  for (let k = 0; k < stretches; k++) {
    const first = stretches === 1 ? 0 : Math.floor(k * (illumination.length - count) / (stretches - 1))
    const means = blockMeans(illumination, { first, count }, block)
    let mean = 0
    for (const value of means) mean += value / means.length
    scale = Math.max(scale, Math.abs(mean))
    let variance = 0
    for (const value of means) variance += (value - mean) ** 2 / means.length
    if (variance < (least * scale) ** 2 / 2) continue
    const tone = pureTone(means, sampleRateHz / block)
    if (!tone) continue
    const x = Math.PI * tone.frequencyHz / sampleRateHz
    found.push({ ...tone, relativeAmplitude: tone.relativeAmplitude * block * Math.sin(x) / Math.sin(x * block) })
  }
  found.sort((a, b) => b.relativeAmplitude - a.relativeAmplitude)
  const tones: LampTone[] = []
  for (const tone of found) {
    if (tone.relativeAmplitude < least * scale) break
    if (!tones.some(kept => Math.abs(kept.frequencyHz / tone.frequencyHz - 1) < 0.01)) tones.push({ ...tone, relativeAmplitude: tone.relativeAmplitude / scale })
  }
  return tones.slice(0, 24)
}

function blockMeans(samples: Float32Array, stretch: { first: number, count: number }, block: number): Float64Array {
  const means = new Float64Array(Math.floor(stretch.count / block))
  for (let k = 0, i = stretch.first; k < means.length; k++) {
    for (const end = i + block; i < end; i++) means[k] += samples[i] / block
  }
  return means
}

/** The sine of a stretch, unless that is mostly something else (a lamp edge, a phase jump, noise). */
function pureTone(samples: Float64Array, sampleRateHz: number): LampTone | null {
  const stretch = { first: 0, count: samples.length }
  const guess = dominantTone(samples, sampleRateHz, { ...stretch, minimumHz: 3 * sampleRateHz / stretch.count })
  if (!guess) return null
  try {
    const fit = fitSine4(samples, sampleRateHz, guess.frequencyHz, stretch)
    return fit.rmsResidual < 0.25 * fit.amplitude ? { frequencyHz: fit.frequencyHz, relativeAmplitude: fit.amplitude } : null
  } catch (error) {
    if (error instanceof SineFitError) return null
    throw error
  }
}

/** Relative amplitude that a tone leaves in a frame's mean: amplitude · |sin(π f T_e) / (π f T_e)|. */
export function beatAmplitude(tone: LampTone, exposureSeconds: number): number {
  const x = Math.PI * tone.frequencyHz * exposureSeconds
  return tone.relativeAmplitude * Math.abs(Math.sin(x) / x)
}
