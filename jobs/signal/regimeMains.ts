import { decimateStretch, type Decimated } from './decimate'
import { solveLinear } from './linearSolve'
import { fitSine4, SineFitError } from './sineFit'
import { dominantTone } from './spectrum'

/** Mains pick-up as the regimes without a harmonic lamp show it. */
export interface MainsTone {
  /** Weighted mean over the stretches that show it. */
  frequencyHz: number
  seen: { middleSeconds: number, frequencyHz: number, sine: number, cosine: number }[]
}

const mainsHz = [50, 60, 100, 120]
const mainsToleranceHz = 0.5
/** Tones further away than this from the lamp's are told apart by the stretch alone (`removeTones`). */
const reachHz = 4
/** Beats of lamp and mains in a stretch from which a joint fit separates them. */
const separableBeats = 0.8

/** A tone in a steady stretch that stands four times above what its noise would give; null when there is none. */
function seenTone(part: Decimated, nominalHz: number): MainsTone['seen'][number] | null {
  const { samples, sampleRateHz, origin } = part
  const near = dominantTone(samples, sampleRateHz, { first: 0, count: samples.length, minimumHz: 20 })
  const guessHz = near && Math.abs(near.frequencyHz - nominalHz) < 2 ? near.frequencyHz : nominalHz
  try {
    const fit = fitSine4(samples, sampleRateHz, guessHz, { origin })
    if (Math.abs(fit.frequencyHz - nominalHz) > mainsToleranceHz) return null
    if (fit.amplitude < 4 * fit.rmsResidual * Math.sqrt(4 / samples.length)) return null
    return { middleSeconds: (origin + (samples.length - 1) / 2) / sampleRateHz, frequencyHz: fit.frequencyHz, sine: fit.sine, cosine: fit.cosine }
  } catch (error) {
    if (error instanceof SineFitError) return null
    throw error
  }
}

/**
 * Tones of 50, 60, 100 or 120 Hz (within 0.5 Hz) in the steady stretches of a record, dark or lit.
 *
 * @param stretches samples [first, end) without a harmonic lamp; the first three seconds of each are looked at
 */
export function findMains(samples: Float32Array, sampleRateHz: number, stretches: { first: number, end: number }[]): MainsTone[] {
  return mainsHz.flatMap((nominalHz) => {
    if (nominalHz > 0.45 * sampleRateHz) return []
    const seen = stretches.flatMap(({ first, end }) => {
      const count = Math.min(end - first, Math.round(3 * sampleRateHz))
      return count < 0.25 * sampleRateHz ? [] : seenTone(decimateStretch(samples, sampleRateHz, { first, count }, nominalHz), nominalHz) ?? []
    })
    if (!seen.length) return []
    return [{ frequencyHz: seen.reduce((sum, { frequencyHz }) => sum + frequencyHz / seen.length, 0), seen }]
  })
}

/** Sine and cosine of the mains beside the lamp's sine, both frequencies known: a linear fit with five parameters. */
function fitBeside({ samples, sampleRateHz, origin }: Decimated, lampHz: number, toneHz: number): { sine: number, cosine: number } | null {
  const normal = new Float64Array(25)
  const right = new Float64Array(5)
  const row = new Float64Array(5)
  const base = samples[0]
  for (let i = 0; i < samples.length; i++) {
    const lamp = 2 * Math.PI * lampHz * (origin + i) / sampleRateHz
    const tone = 2 * Math.PI * toneHz * (origin + i) / sampleRateHz
    row.set([Math.sin(lamp), Math.cos(lamp), Math.sin(tone), Math.cos(tone), 1])
    for (let a = 0; a < 5; a++) {
      right[a] += row[a] * (samples[i] - base)
      for (let b = 0; b < 5; b++) normal[5 * a + b] += row[a] * row[b]
    }
  }
  const x = solveLinear(normal, right)
  return x && { sine: x[2], cosine: x[3] }
}

/**
 * A harmonic stretch without the mains pick-up that lies so close to its lamp's frequency that it would turn its phase.
 *
 * Where lamp and mains beat at least 0.8 times in the stretch both are fitted jointly; where they do not, the mains is
 * carried over from the nearest steady stretch by its frequency there, as if it kept its phase.
 */
export function withoutMains(part: Decimated, lampHz: number, tones: readonly MainsTone[]): Decimated {
  const near = tones.filter(tone => Math.abs(tone.frequencyHz - lampHz) < reachHz)
  if (!near.length) return part
  const samples = part.samples.slice()
  const seconds = samples.length / part.sampleRateHz
  const middle = (part.origin + (samples.length - 1) / 2) / part.sampleRateHz
  for (const tone of near) {
    const closest = tone.seen.reduce((best, other) => Math.abs(other.middleSeconds - middle) < Math.abs(best.middleSeconds - middle) ? other : best)
    const separable = Math.abs(tone.frequencyHz - lampHz) * seconds >= separableBeats
    const toneHz = separable ? tone.frequencyHz : closest.frequencyHz
    const mains = separable ? fitBeside({ ...part, samples }, lampHz, toneHz) : closest
    if (!mains) continue
    const radians = 2 * Math.PI * toneHz / part.sampleRateHz
    for (let i = 0; i < samples.length; i++) {
      const angle = radians * (part.origin + i)
      samples[i] -= mains.sine * Math.sin(angle) + mains.cosine * Math.cos(angle)
    }
  }
  return { ...part, samples }
}

/** A lamp's frequency from coarse runs, sharpened once beside the mains. */
export function lampBesideMains(part: Decimated, guessHz: number, tones: readonly MainsTone[]): { part: Decimated, guessHz: number } {
  if (!tones.some(tone => Math.abs(tone.frequencyHz - guessHz) < reachHz)) return { part, guessHz }
  let lampHz = guessHz
  let clean = part
  for (let pass = 0; pass < 3; pass++) {
    clean = withoutMains(part, lampHz, tones)
    try {
      lampHz = fitSine4(clean.samples, clean.sampleRateHz, lampHz, clean).frequencyHz
    } catch (error) {
      if (!(error instanceof SineFitError)) throw error
      break
    }
  }
  return { part: clean, guessHz: lampHz }
}
