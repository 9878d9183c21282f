import { describe, expect, it } from 'vitest'
import { lampIntegral, lampRegimes, lampSignal } from '../../support/forward/lamp'
import { buildSchedule, defineScenario, frameIntegrals, groupIntegrals, makeTimeline, type RegimeSpec } from '../../support/forward'

const phase: RegimeSpec = { kind: 'phase', line: 1, repetition: 1, startSeconds: 1, endSeconds: 3, levelVolts: 2, frequencyHz: 187.3, depth: 0.9, phaseDeg: 35 }
const reference: RegimeSpec = { kind: 'reference', line: 1, repetition: 1, startSeconds: 3, endSeconds: 4, levelVolts: 2 }
const regimeOf = (specs: RegimeSpec[], settlingSeconds: number, kind: RegimeSpec['kind']) => lampRegimes(specs, settlingSeconds).find(regime => regime.spec.kind === kind)!

/** Composite Simpson rule. */
function quadrature(value: (t: number) => number, from: number, to: number, steps = 4000): number {
  const h = (to - from) / steps
  let sum = value(from) + value(to)
  for (let i = 1; i < steps; i++) sum += value(from + i * h) * (i % 2 === 1 ? 4 : 2)
  return sum * h / 3
}

describe('lamp of the forward model', () => {
  it('follows level·(1 + depth·sin(ωt + φ)) with t from the start of the record', () => {
    const regime = regimeOf([phase], 0, 'phase')
    for (const t of [1, 1.234, 2.9]) expect(lampSignal(regime, t)).toBeCloseTo(2 * (1 + 0.9 * Math.sin(2 * Math.PI * 187.3 * t + 35 * Math.PI / 180)), 11)
  })

  it('integrates a harmonic lamp as the antiderivatives do', () => {
    const omega = 2 * Math.PI * 187.3
    const phi = 35 * Math.PI / 180
    const [from, to] = [1.0213, 1.0413]
    const regime = regimeOf([phase], 0, 'phase')
    const mean = (t: number) => 2 * (t - 0.9 * Math.cos(omega * t + phi) / omega)
    // sin(ωt + φ)·cos ωt = ½[sin(2ωt + φ) + sin φ] and sin(ωt + φ)·sin ωt = ½[cos φ − cos(2ωt + φ)]
    const cosine = (t: number) => 2 * (Math.sin(omega * t) / omega + 0.45 * (t * Math.sin(phi) - Math.cos(2 * omega * t + phi) / (2 * omega)))
    const sine = (t: number) => 2 * (-Math.cos(omega * t) / omega + 0.45 * (t * Math.cos(phi) - Math.sin(2 * omega * t + phi) / (2 * omega)))
    expect(lampIntegral(regime, from, to, 0)[0]).toBeCloseTo(mean(to) - mean(from), 12)
    expect(lampIntegral(regime, from, to, omega)[0]).toBeCloseTo(cosine(to) - cosine(from), 12)
    expect(lampIntegral(regime, from, to, omega)[1]).toBeCloseTo(sine(to) - sine(from), 12)
  })

  it('integrates settling, overtone and ambient light as Simpson’s rule does', () => {
    const omega = 2 * Math.PI * 187.3
    const distorted = { ...phase, secondHarmonicDepth: 0.05 }
    for (const kind of ['phase', 'reference'] as const) {
      const regime = regimeOf([distorted, reference], 0.004, kind)
      const from = regime.startSeconds + 0.0007
      const to = from + 0.02
      for (const harmonic of [0, 1, 2]) {
        const [real, imaginary] = lampIntegral(regime, from, to, harmonic * omega, 0.1)
        expect(real).toBeCloseTo(quadrature(t => (lampSignal(regime, t) + 0.1) * Math.cos(harmonic * omega * t), from, to), 10)
        expect(imaginary).toBeCloseTo(quadrature(t => (lampSignal(regime, t) + 0.1) * Math.sin(harmonic * omega * t), from, to), 10)
      }
    }
  })

  it('goes on from the last signal when it settles', () => {
    const regimes = lampRegimes([phase, reference], 0.01)
    for (let i = 1; i < regimes.length; i++) expect(lampSignal(regimes[i]!, regimes[i]!.startSeconds)).toBeCloseTo(lampSignal(regimes[i - 1]!, regimes[i]!.startSeconds), 9)
  })

  it('is dark before, between and after the regimes', () => {
    const later = { ...reference, startSeconds: 5, endSeconds: 6 }
    const kinds = lampRegimes([phase, later], 0).map(regime => [regime.spec.kind, regime.startSeconds, regime.endSeconds])
    expect(kinds).toEqual([['dark', -Infinity, 1], ['phase', 1, 3], ['dark', 3, 5], ['reference', 5, 6], ['dark', 6, Infinity]])
  })

  it('refuses regimes that overlap', () => {
    expect(() => lampRegimes([phase, { ...reference, startSeconds: 2.5 }], 0)).toThrow('overlap')
  })
})

describe('integrals of frames and groups', () => {
  const regimes = buildSchedule({ startSeconds: 0, lines: [{ frequencyHz: 200, repetitions: 1 }], darkSeconds: 0.5, referenceSeconds: 1, phaseSeconds: 1, levelVolts: 2, depth: 0.8 })
  const scenario = defineScenario({ lines: [{ frequencyHz: 200, forceNewtons: [1, 0], field: [] }], lamp: { regimes } })
  const timeline = makeTimeline(scenario)

  it('are L0, 0 and L0·m/2 a frame where frames hold whole periods (textbook case)', () => {
    const groups = { reference: [30, [2, 0, 0]], sine: [80, [2, 0, 0.8]], cosine: [130, [2, 0.8, 0]] } as const
    for (const [frame, [a, c, s]] of Object.values(groups)) {
      const sum = groupIntegrals(timeline, frame, 10, 200)
      expect([sum.a, sum.c, sum.s].map(value => value / 10)).toEqual([expect.closeTo(a, 10), expect.closeTo(c, 10), expect.closeTo(s, 10)])
    }
  })

  it('share out a frame in which the lamp changes', () => {
    const moved = makeTimeline({ ...scenario, clock: { offsetSeconds: 0.005, driftPpm: 0 } })
    // Frame 24 is open from 0.485 s to 0.505 s: 15 ms of dark, 5 ms of 2 V.
    expect(frameIntegrals(moved, 24, 200).a).toBeCloseTo(2 * 5 / 20, 10)
  })

  it('follow the clock’s offset and drift', () => {
    const moved = makeTimeline({ ...scenario, clock: { offsetSeconds: -0.4, driftPpm: 1000 } })
    // 1.001·1.98 s − 0.4 s = 1.58198 s: in the sine phase, which begins at 1.5 s.
    const [from, to] = [1.58198, 1.58198 + 0.02002]
    const omega = 2 * Math.PI * 200
    const mean = 2 * (1 - 0.8 * (Math.cos(omega * to) - Math.cos(omega * from)) / (omega * 0.02002))
    expect(frameIntegrals(moved, 99, 200).a).toBeCloseTo(mean, 9)
  })
})
