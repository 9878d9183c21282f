import { exponential, exponentialIntegral, times, type Complex } from './complex'
import type { RegimeSpec } from './scenario'

/** Re{amplitude·e^{rate·(t − origin)}} with the origin at the regime's start. */
interface LampTerm { amplitude: Complex, rate: Complex }

/** A regime with its lamp signal as a sum of exponentials, so that every integral has a closed form. */
export interface LampRegime { spec: RegimeSpec, startSeconds: number, endSeconds: number, terms: LampTerm[] }

/** The steady signal of a regime, t counted from record time 0. */
function steadyTerms(spec: RegimeSpec): LampTerm[] {
  if (spec.kind === 'dark') return []
  const terms: LampTerm[] = [{ amplitude: [spec.levelVolts, 0], rate: [0, 0] }]
  if (spec.kind === 'reference') return terms
  const omega = 2 * Math.PI * spec.frequencyHz!
  // a·sin(ωt + φ) = Re{−j·a·e^{jφ}·e^{jωt}}
  const sine = (size: number, rate: number, phase: number) => {
    const angle = phase + rate * spec.startSeconds
    terms.push({ amplitude: [size * Math.sin(angle), -size * Math.cos(angle)], rate: [0, rate] })
  }
  sine(spec.levelVolts * spec.depth!, omega, (spec.phaseDeg ?? 0) * Math.PI / 180)
  if (spec.secondHarmonicDepth) sine(spec.levelVolts * spec.secondHarmonicDepth, 2 * omega, 0)
  return terms
}

const signalOf = (terms: LampTerm[], sinceStart: number) => terms.reduce((sum, { amplitude, rate }) => sum + times(amplitude, exponential([rate[0] * sinceStart, rate[1] * sinceStart]))[0], 0)

/**
 * Regimes in order with every gap filled by darkness, from −∞ to ∞. With settling, each regime starts at the signal
 * where the last one ended and approaches its own exponentially.
 */
export function lampRegimes(specs: RegimeSpec[], settlingSeconds: number): LampRegime[] {
  const filled: RegimeSpec[] = []
  const dark = (startSeconds: number, endSeconds: number): RegimeSpec => ({ kind: 'dark', startSeconds, endSeconds, line: null, repetition: null, levelVolts: 0 })
  let now = -Infinity
  for (const spec of [...specs].sort((a, b) => a.startSeconds - b.startSeconds)) {
    if (spec.startSeconds < now - 1e-9) throw new Error(`Regimes overlap at ${spec.startSeconds} s of record time. Let each start where the one before ends.`)
    if (spec.startSeconds > now + 1e-9) filled.push(dark(now, spec.startSeconds))
    filled.push(spec)
    now = spec.endSeconds
  }
  filled.push(dark(now, Infinity))
  const regimes: LampRegime[] = []
  for (const spec of mergeDarks(filled)) {
    const terms = steadyTerms(spec)
    const last = regimes.at(-1)
    if (last && settlingSeconds > 0) {
      const before = signalOf(last.terms, Number.isFinite(last.startSeconds) ? last.endSeconds - last.startSeconds : 0)
      terms.push({ amplitude: [before - signalOf(terms, 0), 0], rate: [-1 / settlingSeconds, 0] })
    }
    regimes.push({ spec, startSeconds: spec.startSeconds, endSeconds: spec.endSeconds, terms })
  }
  return regimes
}

/** Nobody can tell two darks in a row apart; the one that belongs to a line gives its name. */
function mergeDarks(specs: RegimeSpec[]): RegimeSpec[] {
  const merged: RegimeSpec[] = []
  for (const spec of specs) {
    const last = merged.at(-1)
    if (last?.kind === 'dark' && spec.kind === 'dark') merged[merged.length - 1] = { ...(last.line === null ? spec : last), startSeconds: last.startSeconds, endSeconds: spec.endSeconds }
    else merged.push(spec)
  }
  return merged
}

/** L(t) inside a regime, V over dark. */
export const lampSignal = (regime: LampRegime, recordSeconds: number): number => signalOf(regime.terms, Number.isFinite(regime.startSeconds) ? recordSeconds - regime.startSeconds : 0)

/** ∫ L(t)·e^{jνt} dt from `from` to `to` (both inside the regime), t in record time, plus a steady light of `ambientVolts`. */
export function lampIntegral(regime: LampRegime, from: number, to: number, omega: number, ambientVolts = 0): Complex {
  const length = to - from
  const origin = Number.isFinite(regime.startSeconds) ? regime.startSeconds : from
  let real = 0
  let imaginary = 0
  const add = (amplitude: Complex, rate: Complex, share: number) => {
    const atStart = times(amplitude, exponential([rate[0] * (from - origin), rate[1] * (from - origin) + omega * from]))
    const integral = times(atStart, exponentialIntegral([rate[0], rate[1] + omega], length))
    real += share * integral[0]
    imaginary += share * integral[1]
  }
  // Re{z} = (z + z̄)/2
  for (const { amplitude, rate } of regime.terms) {
    add(amplitude, rate, 0.5)
    add([amplitude[0], -amplitude[1]], [rate[0], -rate[1]], 0.5)
  }
  if (ambientVolts !== 0) add([ambientVolts, 0], [0, 0], 1)
  return [real, imaginary]
}
