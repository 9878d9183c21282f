import { fitSine4, SineFitError } from './sineFit'
import { dominantTone } from './spectrum'

export interface LampTone {
  frequencyHz: number
  /** Amplitude over the record's highest level, about depth × relative level. */
  relativeAmplitude: number
}

/**
 * The lamp's tones in a record at a glance: the dominant tone of up to 64 stretches of 0.25 s spread over it, those within
 * 1 % merged, those of less than three periods or 5 % of the highest level left out. Good to about
 * 0.05 Hz; use `findRegimes` for the measurement.
 */
export function lampTones(illumination: Float32Array, sampleRateHz: number): LampTone[] {
  const count = Math.min(illumination.length, Math.max(64, Math.round(0.25 * sampleRateHz)))
  const stretches = Math.max(1, Math.min(64, Math.floor(illumination.length / count)))
  const found: LampTone[] = []
  let scale = 0
  for (let k = 0; k < stretches; k++) {
    const first = stretches === 1 ? 0 : Math.floor(k * (illumination.length - count) / (stretches - 1))
    let mean = 0
    for (let i = first; i < first + count; i++) mean += illumination[i] / count
    scale = Math.max(scale, Math.abs(mean))
    const tone = pureTone(illumination, sampleRateHz, { first, count })
    if (tone) found.push(tone)
  }
  found.sort((a, b) => b.relativeAmplitude - a.relativeAmplitude)
  const tones: LampTone[] = []
  for (const tone of found) {
    if (tone.relativeAmplitude < 0.05 * scale) break
    if (!tones.some(kept => Math.abs(kept.frequencyHz / tone.frequencyHz - 1) < 0.01)) tones.push({ ...tone, relativeAmplitude: tone.relativeAmplitude / scale })
  }
  return tones.slice(0, 24)
}

/** The stretch's sine, unless it is mostly something else (a lamp edge, a phase jump, noise). */
function pureTone(illumination: Float32Array, sampleRateHz: number, stretch: { first: number, count: number }): LampTone | null {
  const guess = dominantTone(illumination, sampleRateHz, { ...stretch, minimumHz: 3 * sampleRateHz / stretch.count })
  if (!guess) return null
  try {
    const fit = fitSine4(illumination, sampleRateHz, guess.frequencyHz, stretch)
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
