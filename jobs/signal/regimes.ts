import type { Flag, Regime } from '../../shared/measurement'
import { decimateStretch } from './decimate'
import { findLineFrequencies } from './lineFrequency'
import { refineBoundaries, type LampStretch } from './regimeBoundaries'
import { findMains, lampBesideMains } from './regimeMains'
import { removeTones } from './removeTones'
import { findRuns } from './regimeRuns'
import { fitSine3, wrapDegrees, type SineFit } from './sineFit'

export interface RegimeOptions {
  plannedFrequenciesHz?: number[]
  /** Shortest lit regime, default 0.3 s. A dark one may be a third of it. Six cycles of the lowest line must fit in. */
  minimumSeconds?: number
}

export interface RegimeResult {
  regimes: Regime[]
  /** Mean of the dark regimes by duration, record units; null when the record never sees the lamp off. */
  darkLevel: number | null
  darkSource: 'intervals' | 'none'
  flags: Flag[]
}

interface Fitted {
  stretch: LampStretch
  level: number
  fit: SineFit | null
  frequencyDeviationHz: number | null
}

function meanOf(samples: Float32Array, first: number, end: number): number {
  let sum = 0
  for (let i = first; i < end; i++) sum += samples[i]
  return sum / (end - first)
}

/** Join neighbours that one model explains: a run broken by a glitch or by a slow change of the lamp. */
function joinContinued(samples: Float32Array, sampleRateHz: number, stretches: LampStretch[], scale: number): LampStretch[] {
  const joined: LampStretch[] = []
  for (const stretch of stretches) {
    const last = joined.at(-1)
    if (last && stretch.first - last.end <= 0.01 * sampleRateHz && continues(samples, sampleRateHz, last, stretch, scale)) last.end = stretch.end
    else joined.push({ ...stretch })
  }
  return joined
}

function continues(samples: Float32Array, sampleRateHz: number, left: LampStretch, right: LampStretch, scale: number): boolean {
  if (left.kind !== right.kind) return false
  const reach = Math.round(0.2 * sampleRateHz)
  const tail = { first: Math.max(left.first, left.end - reach), count: Math.min(reach, left.end - left.first) }
  const head = { first: right.first, count: Math.min(reach, right.end - right.first) }
  const step = meanOf(samples, head.first, head.first + head.count) - meanOf(samples, tail.first, tail.first + tail.count)
  if (left.kind === 'constant') return Math.abs(step) < 0.015 * scale
  if (Math.abs(left.frequencyHz! - right.frequencyHz!) > 0.02 + 1e-4 * left.frequencyHz!) return false
  const before = fitSine3(samples, sampleRateHz, left.frequencyHz!, tail)
  const after = fitSine3(samples, sampleRateHz, left.frequencyHz!, head)
  return Math.abs(wrapDegrees(after.phaseDeg - before.phaseDeg)) < 6
    && Math.abs(after.amplitude / before.amplitude - 1) < 0.05 && Math.abs(step) < 0.03 * scale
}

/**
 * Mains pick-up in the dark looks like a harmonic lamp that goes below zero light: its amplitude exceeds its height above
 * the lowest level, and that height is next to nothing beside the lit levels.
 */
function isPickUp(entry: Fitted, lowest: number, lit: number): boolean {
  const height = entry.level - lowest
  return entry.fit !== null && height < 0.1 * (lit - lowest) && entry.fit.amplitude > 1.5 * height && entry.fit.amplitude < 0.3 * (lit - lowest)
}

function withoutPickUp(fitted: Fitted[]): Fitted[] {
  const lit = Math.max(...fitted.map(entry => entry.level))
  const lowest = Math.min(...fitted.map(entry => entry.level))
  return fitted.map(entry => isPickUp(entry, lowest, lit) ? { ...entry, fit: null, frequencyDeviationHz: null, stretch: { ...entry.stretch, kind: 'constant', frequencyHz: null } } : entry)
}

/** Lamp off: near the lowest level, far below lit, and not above the troughs of the harmonic regimes. */
function markDark(fitted: Fitted[]): Set<Fitted> {
  const lit = Math.max(0, ...fitted.map(entry => entry.level))
  const lowest = Math.min(...fitted.map(entry => entry.level))
  const troughs = fitted.filter(entry => entry.fit).map(entry => entry.level - entry.fit!.amplitude)
  const ceiling = Math.min(lowest + 0.1 * (lit - lowest), 0.3 * lit, ...troughs.map(trough => trough + 0.1 * lit))
  return new Set(fitted.filter(entry => !entry.fit && entry.level <= ceiling))
}

function levelDrift(samples: Float32Array, { first, end }: LampStretch): number {
  const tenth = Math.max(1, Math.floor((end - first) / 10))
  return meanOf(samples, end - tenth, end) - meanOf(samples, first, first + tenth)
}

function regimeFlags(samples: Float32Array, sampleRateHz: number, entry: Fitted, lit: number, distortion: number | null): Flag[] {
  const flags: Flag[] = []
  const { stretch } = entry
  if (stretch.settlingSamples > 0) {
    const milliseconds = Math.round(1000 * stretch.settlingSamples / sampleRateHz)
    flags.push({ code: 'lamp-settling', severity: 'note', message: `The lamp settled for ${milliseconds} ms; that stretch is left out of the regime.` })
  }
  const drift = levelDrift(samples, stretch) / lit
  if (Math.abs(drift) > 0.05) {
    flags.push({ code: 'level-drift', severity: 'warning', message: `The lamp level moves by ${(100 * drift).toFixed(1)} % during this regime; let the lamp warm up.` })
  }
  if (distortion !== null && distortion > 0.1) {
    flags.push({ code: 'lamp-distorted', severity: 'warning', message: `The lamp departs from a sine by ${(100 * distortion).toFixed(0)} %; check its controller.` })
  }
  return flags
}

function toRegime(samples: Float32Array, sampleRateHz: number, entry: Fitted, context: { dark: boolean, darkLevel: number, lit: number }): Regime {
  const { stretch, fit, level } = entry
  const atEnd = stretch.end >= samples.length
  const distortion = fit ? fit.rmsResidual / (fit.amplitude / Math.SQRT2) : null
  return {
    kind: context.dark ? 'dark' : stretch.kind,
    startSeconds: stretch.first === 0 ? 0 : (stretch.first - 0.5) / sampleRateHz,
    endSeconds: atEnd ? (samples.length - 1) / sampleRateHz : (stretch.end - 0.5) / sampleRateHz,
    level,
    frequencyHz: fit?.frequencyHz ?? null,
    lampPhaseDeg: fit?.phaseDeg ?? null,
    depth: fit ? fit.amplitude / (level - context.darkLevel) : null,
    distortion,
    frequencyDeviationHz: entry.frequencyDeviationHz,
    // Of a known frequency's phase under white noise: √2·σ / (A·√n) radians.
    phaseDeviationDeg: distortion === null ? null : distortion / Math.sqrt(stretch.end - stretch.first) * 180 / Math.PI,
    flags: regimeFlags(samples, sampleRateHz, entry, context.lit, distortion),
  }
}

/** Frequency, phase and amplitude from the stretch without ripple, level and residual from the stretch as it is. */
function fitStretches(samples: Float32Array, sampleRateHz: number, stretches: LampStretch[], planned: number[]): Fitted[] {
  const harmonic = stretches.filter(stretch => stretch.kind === 'harmonic')
  const mains = findMains(samples, sampleRateHz, stretches.filter(stretch => stretch.kind === 'constant'))
  const parts = harmonic.map((stretch) => {
    const guessHz = stretch.frequencyHz!
    const raw = decimateStretch(samples, sampleRateHz, { first: stretch.first, count: stretch.end - stretch.first }, guessHz)
    const { part, guessHz: lampHz } = lampBesideMains(raw, guessHz, mains)
    return { ...part, samples: removeTones(part.samples, part.sampleRateHz, lampHz), guessHz: lampHz }
  })
  const fits = new Map<LampStretch, { fit: SineFit, deviationHz: number }>()
  for (const line of findLineFrequencies(parts, planned)) {
    for (const member of line.members) {
      const stretch = harmonic[member]
      const part = parts[member]
      const clean = fitSine3(part.samples, part.sampleRateHz, line.frequencyHz, part)
      const whole = fitSine3(samples, sampleRateHz, line.frequencyHz, { first: stretch.first, count: stretch.end - stretch.first })
      fits.set(stretch, { fit: { ...whole, phaseDeg: clean.phaseDeg, amplitude: clean.amplitude / part.gain }, deviationHz: line.deviationHz })
    }
  }
  return stretches.map((stretch) => {
    const { fit, deviationHz } = fits.get(stretch) ?? { fit: null, deviationHz: null }
    return { stretch, fit, level: fit ? fit.offset : meanOf(samples, stretch.first, stretch.end), frequencyDeviationHz: deviationHz }
  })
}

function recordFlags(regimes: Regime[], darkLevel: number | null): Flag[] {
  const flags: Flag[] = []
  if (!regimes.some(regime => regime.kind === 'harmonic')) {
    flags.push({ code: 'no-harmonic-regime', severity: 'problem', message: 'The illumination channel shows no harmonic lamp; check that the right channel was chosen.' })
  }
  if (darkLevel === null) {
    flags.push({ code: 'dark-level-unseen', severity: 'warning', message: 'The record never sees the lamp off, so the photodiode\'s zero is taken as dark; an offset of 2 % makes displacement 2 % wrong. Record a second of darkness.' })
  }
  if (regimes.some(regime => (regime.depth ?? 0) > 1.03)) {
    flags.push({ code: 'depth-above-one', severity: 'warning', message: 'A lamp appears modulated by more than its own level: the dark level or the channel\'s zero is wrong.' })
  }
  return flags
}

/**
 * Find the lamp regimes of a record: dark, constant, harmonic with frequency, phase, depth, distortion.
 *
 * Cells of a sixth of `minimumSeconds` are joined into runs by local fits, then every boundary moves to the sample at
 * which the left model's and the right model's summed squared errors change sides (a phase jump without gap is located
 * to a few samples). Regimes of one line share one jointly fitted frequency, so their phases refer to one ω. Ramps and
 * transients belong to no regime. Boundaries lie half-way between the samples on either side.
 *
 * @param illumination lamp signal in record units, at least 8 samples a cell
 * @param sampleRateHz samples a second; lamp frequencies must lie below half of it
 * @returns regimes in order of time (phase in (−180, 180] about the record's first sample; depth after the dark level,
 *   0 when unseen), the dark level, and flags on the whole record
 * Accuracy on seeded truth: boundaries within a few samples, frequency 0.01 Hz over 1 s, phase 0.2° in the regime's middle.
 *   `lampPhaseDeg` counts from the record's first sample with the line's frequency; an error of that turns it by
 *   360°·δf·t, for all groups of a line alike to first order. Plan the exact frequency where the number itself matters.
 * Source: sine fits of IEEE Std 1057; change point by least squares (Bai 1994).
 */
export function findRegimes(illumination: Float32Array, sampleRateHz: number, options: RegimeOptions = {}): RegimeResult {
  const minimumSeconds = options.minimumSeconds ?? 0.3
  const planned = options.plannedFrequenciesHz ?? []
  const { runs, cells } = findRuns(illumination, sampleRateHz, { plannedFrequenciesHz: planned, secondsPerCell: minimumSeconds / 6 })
  // A true regime fills all but two of its cells; shorter harmonic runs are seeds that straddled a jump.
  const whole = runs.filter(run => run.kind === 'constant' || run.endCell - run.firstCell >= 5)
  const refined = refineBoundaries(illumination, sampleRateHz, whole, cells).filter(stretch => stretch.end - stretch.first > 8)
  const joined = joinContinued(illumination, sampleRateHz, refined, cells.scale)
    .filter(stretch => stretch.end - stretch.first >= (stretch.kind === 'harmonic' ? minimumSeconds : minimumSeconds / 3) * sampleRateHz)
  const fitted = withoutPickUp(fitStretches(illumination, sampleRateHz, joined, planned))
  const dark = markDark(fitted)
  const kept = fitted.filter(entry => dark.has(entry) || entry.stretch.end - entry.stretch.first >= minimumSeconds * sampleRateHz)
  let darkLevel: number | null = null
  if (dark.size) {
    const length = (entry: Fitted) => entry.stretch.end - entry.stretch.first
    const total = [...dark].reduce((sum, entry) => sum + length(entry), 0)
    darkLevel = [...dark].reduce((sum, entry) => sum + entry.level * length(entry), 0) / total
  }
  const lit = Math.max(Number.MIN_VALUE, ...fitted.map(entry => Math.abs(entry.level)))
  const regimes = kept.map(entry => toRegime(illumination, sampleRateHz, entry, { dark: dark.has(entry), darkLevel: darkLevel ?? 0, lit }))
  return { regimes, darkLevel, darkSource: dark.size ? 'intervals' : 'none', flags: recordFlags(regimes, darkLevel) }
}
