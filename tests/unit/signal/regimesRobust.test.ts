import { describe, expect, it } from 'vitest'
import { findRegimes } from '../../../jobs/signal/regimes'
import { wrapDegrees } from '../../../jobs/signal/sineFit'
import { buildSchedule, defineScenario, makeTimeline } from '../../support/forward'
import { photodiode } from '../../support/forward/record'
import { gaussianRandom } from '../../support/forward/random'

interface Conditions {
  lines?: number[]
  plannedHz?: number[]
  repetitions?: number
  depth?: number
  phasesDeg?: number[]
  sampleRateHz?: number
  noiseVolts?: number
  mains?: { volts: number, hertz: number }
  settlingSeconds?: number
  startSeconds?: number
  /** Of the record, after the lamp's end; negative cuts it short. */
  afterSeconds?: number
}

/** Regimes of 1 s and more at 2 V on 30 mV of dark, judged against the forward model. */
function judge(conditions: Conditions) {
  const { lines = [211.3], repetitions = 2, depth = 0.9, phasesDeg, sampleRateHz = 10_000, noiseVolts = 0.01, mains, settlingSeconds = 0, startSeconds = 0.3, afterSeconds = 0, plannedHz } = conditions
  const regimes = buildSchedule({ startSeconds, lines: lines.map(frequencyHz => ({ frequencyHz, repetitions })), darkSeconds: 0.7, referenceSeconds: 1, phaseSeconds: 1, levelVolts: 2, depth, phasesDeg, unevenness: 0.2 })
  const scenario = defineScenario({
    lines: lines.map(frequencyHz => ({ frequencyHz, field: [], forceNewtons: [1, 0] as const })), lamp: { regimes, settlingSeconds, darkVolts: 0.03 },
    record: { sampleRateHz, durationSeconds: regimes.at(-1)!.endSeconds + afterSeconds, mainsVolts: mains?.volts ?? 0, mainsHz: mains?.hertz ?? 50 },
  })
  const timeline = makeTimeline(scenario)
  const normal = gaussianRandom(5)
  const { durationSeconds } = scenario.record
  const illumination = Float32Array.from({ length: Math.round(durationSeconds * sampleRateHz) }, (_, i) => photodiode(timeline, i / sampleRateHz) + noiseVolts * normal())
  const found = findRegimes(illumination, sampleRateHz, { plannedFrequenciesHz: plannedHz })
  const truths = timeline.regimes.map(({ spec, startSeconds, endSeconds }) => ({ ...spec, startSeconds: Math.max(0, startSeconds), endSeconds: Math.min(durationSeconds, endSeconds) })).filter(truth => truth.endSeconds - truth.startSeconds > 0.2)
  const kinds = { dark: 'dark', reference: 'constant', phase: 'harmonic' }
  expect(found.regimes.map(regime => regime.kind)).toEqual(truths.map(truth => kinds[truth.kind]))
  const worst = { early: 0, late: 0, end: 0, frequencyHz: 0, phaseDeg: 0, depth: 0, deviations: 0 }
  truths.forEach((truth, k) => {
    const regime = found.regimes[k]
    worst.early = Math.max(worst.early, truth.startSeconds - regime.startSeconds)
    worst.late = Math.max(worst.late, regime.startSeconds - truth.startSeconds)
    worst.end = Math.max(worst.end, Math.abs(regime.endSeconds - truth.endSeconds))
    if (truth.kind !== 'phase') return
    const frequencyError = regime.frequencyHz! - truth.frequencyHz!
    const phaseError = wrapDegrees(regime.lampPhaseDeg! - (truth.phaseDeg ?? 0) + 360 * frequencyError * (regime.startSeconds + regime.endSeconds) / 2)
    worst.frequencyHz = Math.max(worst.frequencyHz, Math.abs(frequencyError))
    worst.phaseDeg = Math.max(worst.phaseDeg, Math.abs(phaseError))
    worst.depth = Math.max(worst.depth, Math.abs(regime.depth! / truth.depth! - 1))
    worst.deviations = Math.max(worst.deviations, Math.abs(frequencyError) / regime.frequencyDeviationHz!)
  })
  return { ...found, worst }
}

function expectGood({ worst }: ReturnType<typeof judge>, boundarySeconds = 5e-4) {
  expect(worst.early).toBeLessThan(boundarySeconds)
  expect(worst.late).toBeLessThan(boundarySeconds)
  expect(worst.end).toBeLessThan(boundarySeconds)
  expect(worst.frequencyHz).toBeLessThan(0.01)
  expect(worst.phaseDeg).toBeLessThan(0.2)
  expect(worst.depth).toBeLessThan(0.01)
}

describe('mains pick-up', () => {
  it.each([50, 60, 100])('of a 25th of the lamp in the dark is no lamp, at %s Hz', (hertz) => {
    const found = judge({ mains: { volts: 0.08, hertz } })
    expectGood(found)
    expect(found.darkLevel).toBeCloseTo(0.03, 2)
  })

  it.each([[49.2, 50, undefined], [100.4, 100, undefined], [99, 100, [99]], [121.3, 120, undefined]])('does not turn a lamp of %s Hz beside %s Hz', (lamp, hertz, plannedHz) => {
    expectGood(judge({ lines: [lamp], mains: { volts: 0.04, hertz }, plannedHz }))
  })
})

describe('bad lamps and records', () => {
  it('depth 0.2, a quarter that is 60° or 20°, three lines of which two are 1.1 Hz apart', () => {
    expectGood(judge({ depth: 0.2 }))
    expectGood(judge({ phasesDeg: [20, 80] }))
    expectGood(judge({ phasesDeg: [20, 40] }))
    expectGood(judge({ lines: [88.3, 211.3, 212.4] }))
  })

  it.each([1330, 887])('%s samples a second, 6.3 and 4.2 a period, are enough for 211.3 Hz', (sampleRateHz) => {
    expectGood(judge({ sampleRateHz, noiseVolts: 0.003 }), 1.5 / sampleRateHz)
  })

  it.each([[213.4], [222]])('a plan of %s Hz for 211.3 Hz does no harm', (plannedHz) => {
    expectGood(judge({ plannedHz: [plannedHz] }))
  })

  it.each([0.005, 0.02])('a lamp that settles with %s s: regimes begin after it, with a flag, and never before their true start', (settlingSeconds) => {
    const { worst, regimes } = judge({ settlingSeconds })
    expect(worst.early).toBeLessThan(1e-4)
    expect(worst.late).toBeGreaterThan(settlingSeconds)
    expect(worst.late).toBeLessThan(12 * settlingSeconds)
    expect(worst.phaseDeg).toBeLessThan(0.2)
    expect(regimes.some(regime => regime.flags.some(flag => flag.code === 'lamp-settling'))).toBe(true)
  })

  it('a record that stops within the last phase', () => {
    expectGood(judge({ afterSeconds: -1.3 }))
  })

  it('dark under noise of 20 % of the lamp', () => {
    expect(judge({ noiseVolts: 0.4 }).darkLevel).toBeCloseTo(0.03, 1)
  })
})

describe('one regime of 1 s far into a noisy record', () => {
  it('is found behind 300 s of darkness, its phase is right where it lies, and its stated deviation covers the frequency', () => {
    const found = judge({ repetitions: 1, startSeconds: 300, noiseVolts: 0.1, sampleRateHz: 5000 })
    expectGood(found)
    expect(found.worst.deviations).toBeLessThan(4)
    expect(found.worst.frequencyHz).toBeGreaterThan(0)
  })

  it('has its phase about time zero right too when the plan says the frequency', () => {
    const { regimes } = judge({ repetitions: 1, startSeconds: 300, noiseVolts: 0.1, sampleRateHz: 5000, plannedHz: [211.3] })
    const [sine, cosine] = regimes.filter(regime => regime.kind === 'harmonic')
    expect(Math.abs(wrapDegrees(sine.lampPhaseDeg!))).toBeLessThan(0.2)
    expect(Math.abs(wrapDegrees(cosine.lampPhaseDeg! - 90))).toBeLessThan(0.2)
  })
})

it.each([0.8, 2, 4])('a level that wanders at %s Hz is no lamp', (wanderHz) => {
  const normal = gaussianRandom(3)
  const record = Float32Array.from({ length: 40_000 }, (_, i) => 1 + 0.5 * Math.sin(2 * Math.PI * wanderHz * i / 10_000) + 0.003 * normal())
  expect(findRegimes(record, 10_000).regimes.filter(regime => regime.kind === 'harmonic')).toEqual([])
})
