import { fitSine4, SineFitError, type SineFit } from './sineFit'
import { dominantTone } from './spectrum'

const mostTones = 3
const spectrumSamples = 16_384

function subtract(target: Float64Array, fit: SineFit, sampleRateHz: number, withOffset: boolean): void {
  const radiansPerSample = 2 * Math.PI * fit.frequencyHz / sampleRateHz
  for (let i = 0; i < target.length; i++) {
    const angle = radiansPerSample * i
    target[i] -= fit.sine * Math.sin(angle) + fit.cosine * Math.cos(angle) + (withOffset ? fit.offset : 0)
  }
}

function tryFit(samples: Float64Array, sampleRateHz: number, guessHz: number): SineFit | null {
  try {
    return fitSine4(samples, sampleRateHz, guessHz)
  } catch (error) {
    if (error instanceof SineFitError) return null
    throw error
  }
}

/**
 * A copy of a stretch without the tones that stand beside its sine (mains ripple, its products with the lamp,
 * harmonics), so that they do not leak into the sine's frequency and phase.
 *
 * The sine is fitted and taken out, the strongest tone of the rest fitted and taken out of the samples, up to three times.
 * A tone counts when it is ten times above what noise would give, and lies two resolution widths from the sine and below
 * half the sample rate.
 *
 * @param frequencyHz of the sine to keep, good to half a cycle over the stretch
 */
export function removeTones(samples: Float64Array, sampleRateHz: number, frequencyHz: number): Float64Array {
  const clean = samples.slice()
  const resolutionHz = sampleRateHz / samples.length
  for (let tones = 0; tones < mostTones; tones++) {
    const sine = tryFit(clean, sampleRateHz, frequencyHz)
    if (!sine) return clean
    const rest = Float64Array.from(clean)
    subtract(rest, sine, sampleRateHz, true)
    const found = dominantTone(rest, sampleRateHz, { first: 0, count: Math.min(rest.length, spectrumSamples), minimumHz: 2 * resolutionHz })
    if (!found || found.amplitude ** 2 < 100 * 4 * sine.rmsResidual ** 2 / Math.min(rest.length, spectrumSamples)) return clean
    const tone = tryFit(rest, sampleRateHz, found.frequencyHz)
    if (!tone || Math.abs(tone.frequencyHz - sine.frequencyHz) < 2 * resolutionHz) return clean
    subtract(clean, tone, sampleRateHz, false)
  }
  return clean
}
