import { describe, expect, it } from 'vitest'
import { splitByFit } from '../../../jobs/signal/regimeBoundaries'
import { findRegimes } from '../../../jobs/signal/regimes'
import { wrapDegrees } from '../../../jobs/signal/sineFit'
import { makeRecord, piecesOf, scheduleEnd, seededUniform, usualSchedule, type Schedule } from './synthetic'

/** Regimes against the states of a schedule that fills the whole record: kinds in order, worst errors. */
function compare(schedule: Schedule, regimes: ReturnType<typeof findRegimes>['regimes']) {
  const states = piecesOf(schedule).slice(1, -1)
  expect(regimes.map(regime => regime.kind)).toEqual(states.map(state => state.frequencyHz > 0 ? 'harmonic' : state.level > 0 ? 'constant' : 'dark'))
  const worst = { boundarySeconds: 0, frequencyHz: 0, phaseDeg: 0, depth: 0 }
  states.forEach((state, k) => {
    const regime = regimes[k]
    if (k > 0) worst.boundarySeconds = Math.max(worst.boundarySeconds, Math.abs(regime.startSeconds - state.start))
    if (k < states.length - 1) worst.boundarySeconds = Math.max(worst.boundarySeconds, Math.abs(regime.endSeconds - state.end))
    if (state.frequencyHz === 0) return
    worst.frequencyHz = Math.max(worst.frequencyHz, Math.abs(regime.frequencyHz! - state.frequencyHz))
    worst.phaseDeg = Math.max(worst.phaseDeg, Math.abs(wrapDegrees(regime.lampPhaseDeg! - state.phaseDeg)))
    worst.depth = Math.max(worst.depth, Math.abs(regime.depth! - state.depth))
  })
  return worst
}

describe('regimes of a record', () => {
  it('two lines, two repetitions, no gaps, noise and mains ripple: boundaries within 0.3 ms, frequency 0.01 Hz, phase 0.2°', () => {
    const uniform = seededUniform(5)
    const schedule: Schedule = {
      ...usualSchedule({ frequenciesHz: [202.3, 415.7], repetitions: 2, seconds: 1, darkSeconds: 0.5, jitter: () => 0.3 * uniform(), levels: [1, 0.7] }),
      ripple: { depth: 0.03, frequencyHz: 100 },
    }
    const record = makeRecord(schedule, { sampleRateHz: 10_000, seconds: scheduleEnd(schedule), noise: 0.01, darkOffset: 0.02 })
    const found = findRegimes(record, 10_000)
    const worst = compare(schedule, found.regimes)
    expect(worst.boundarySeconds).toBeLessThan(3e-4)
    expect(worst.frequencyHz).toBeLessThan(1e-3)
    expect(worst.phaseDeg).toBeLessThan(0.2)
    expect(worst.depth).toBeLessThan(0.005)
    expect(found.darkLevel).toBeCloseTo(0.02, 3)
    expect(found.darkSource).toBe('intervals')
  })

  it.each([[23.7, 5_000], [61.1, 5_000], [333.3, 10_000], [1203.3, 20_000], [4003.3, 100_000]])('locates sine to cosine without gap at %s Hz within a twentieth of a period', (frequencyHz, sampleRateHz) => {
    const uniform = seededUniform(Math.round(frequencyHz))
    const schedule = usualSchedule({ frequenciesHz: [frequencyHz], repetitions: 3, seconds: 0.8, jitter: () => 0.2 * uniform(), depth: 0.8 })
    const record = makeRecord(schedule, { sampleRateHz, seconds: scheduleEnd(schedule), noise: 0.01 })
    const worst = compare(schedule, findRegimes(record, sampleRateHz).regimes)
    expect(worst.boundarySeconds).toBeLessThan(Math.max(0.05 / frequencyHz, 1.5 / sampleRateHz))
  })

  it('finds a line that changes frequency by 1 Hz without any gap or level change', () => {
    const states = [
      { seconds: 1.03, level: 1, frequencyHz: 150, phaseDeg: 0, depth: 0.9 },
      { seconds: 1.11, level: 1, frequencyHz: 151, phaseDeg: 40, depth: 0.9 },
    ]
    const worst = compare({ states }, findRegimes(makeRecord({ states }, { sampleRateHz: 10_000, seconds: 2.14, noise: 0.01 }), 10_000).regimes)
    expect(worst.frequencyHz).toBeLessThan(0.01)
    expect(worst.boundarySeconds).toBeLessThan(1e-3)
  })

  it('says so when the record never sees the lamp off', () => {
    const schedule = usualSchedule({ frequenciesHz: [120.4], repetitions: 2, seconds: 1 })
    const found = findRegimes(makeRecord(schedule, { sampleRateHz: 5000, seconds: scheduleEnd(schedule), noise: 0.005 }), 5000)
    expect(found.darkLevel).toBeNull()
    expect(found.darkSource).toBe('none')
    expect(found.flags.map(flag => flag.code)).toContain('dark-level-unseen')
    compare(schedule, found.regimes)
  })

  it('subtracts the dark level before it states the depth', () => {
    const states = [{ seconds: 1, level: 0 }, { seconds: 1, level: 1, frequencyHz: 80, phaseDeg: 0, depth: 0.5 }]
    const record = makeRecord({ states }, { sampleRateHz: 5000, seconds: 2, darkOffset: 0.25 })
    expect(findRegimes(record, 5000).regimes[1].depth).toBeCloseTo(0.5, 3)
  })

  it('takes 3 % of 100 Hz ripple for a constant lamp, also when 100 Hz is planned', () => {
    const schedule: Schedule = { states: [{ seconds: 1, level: 0 }, { seconds: 2, level: 1 }], ripple: { depth: 0.03, frequencyHz: 100 } }
    const record = makeRecord(schedule, { sampleRateHz: 5000, seconds: 3, noise: 0.003 })
    expect(findRegimes(record, 5000).regimes.map(regime => regime.kind)).toEqual(['dark', 'constant'])
    expect(findRegimes(record, 5000, { plannedFrequenciesHz: [100] }).regimes.map(regime => regime.kind)).toEqual(['dark', 'constant'])
  })

  it('sees modulation of 4 % when its frequency is planned', () => {
    const states = [{ seconds: 1, level: 1 }, { seconds: 1.2, level: 1, frequencyHz: 210, phaseDeg: 10, depth: 0.04 }]
    const record = makeRecord({ states }, { sampleRateHz: 5000, seconds: 2.2, noise: 0.003 })
    const { regimes } = findRegimes(record, 5000, { plannedFrequenciesHz: [210] })
    expect(regimes.map(regime => regime.kind)).toEqual(['constant', 'harmonic'])
    expect(regimes[1].depth).toBeCloseTo(0.04, 2)
    expect(regimes[1].startSeconds).toBeCloseTo(1, 2)
  })

  it('leaves a ramp out and trims a settling lamp, with a flag', () => {
    const rate = 5000
    const record = new Float32Array(4 * rate)
    for (let i = 0; i < record.length; i++) {
      const t = i / rate
      if (t < 1) record[i] = t
      else if (t < 2) record[i] = 1
      else record[i] = (1 - 0.4 * Math.exp(-(t - 2) / 0.05)) * (1 + 0.9 * Math.sin(2 * Math.PI * 180 * t))
    }
    const { regimes } = findRegimes(record, rate)
    expect(regimes.map(regime => regime.kind)).toEqual(['constant', 'harmonic'])
    expect(regimes[0].startSeconds).toBeGreaterThan(0.94)
    expect(regimes[0].endSeconds).toBeCloseTo(2, 3)
    expect(regimes[1].startSeconds).toBeGreaterThan(2.04)
    expect(regimes[1].startSeconds).toBeLessThan(2.3)
    expect(regimes[1].flags.map(flag => flag.code)).toContain('lamp-settling')
  })

  it('finds a dark gap of 60 ms between two regimes without making it a regime', () => {
    const states = [{ seconds: 1, level: 1 }, { seconds: 0.06, level: 0 }, { seconds: 1, level: 1, frequencyHz: 97.3, phaseDeg: 0, depth: 0.9 }]
    const { regimes } = findRegimes(makeRecord({ states }, { sampleRateHz: 10_000, seconds: 2.06, noise: 0.01 }), 10_000)
    expect(regimes.map(regime => regime.kind)).toEqual(['constant', 'harmonic'])
    expect(regimes[0].endSeconds).toBeCloseTo(1, 3)
    expect(regimes[1].startSeconds).toBeCloseTo(1.06, 3)
    expect(regimes[1].flags).toEqual([])
  })

  it('gives all repetitions of a line one frequency, good to 1e-4 Hz, and a planned one when they agree', () => {
    const schedule = usualSchedule({ frequenciesHz: [202.345], repetitions: 4, seconds: 1, depth: 0.9 })
    const record = makeRecord(schedule, { sampleRateHz: 5000, seconds: scheduleEnd(schedule), noise: 0.01 })
    const free = findRegimes(record, 5000).regimes.filter(regime => regime.kind === 'harmonic').map(regime => regime.frequencyHz!)
    expect(new Set(free).size).toBe(1)
    expect(Math.abs(free[0] - 202.345)).toBeLessThan(1e-4)
    expect(findRegimes(record, 5000, { plannedFrequenciesHz: [202.345] }).regimes[1].frequencyHz).toBe(202.345)
    expect(findRegimes(record, 5000, { plannedFrequenciesHz: [202.347] }).regimes[1].frequencyHz).not.toBe(202.347)
  })

  it('states the distortion of a lamp with 8 % of second harmonic', () => {
    const record = Float32Array.from({ length: 10_000 }, (_, i) => 1 + 0.5 * Math.sin(2 * Math.PI * 100.3 * i / 5000) + 0.04 * Math.sin(4 * Math.PI * 100.3 * i / 5000))
    expect(findRegimes(record, 5000).regimes[0].distortion).toBeCloseTo(0.08, 3)
  })

  it('finds nothing in noise and in a record shorter than a regime', () => {
    const uniform = seededUniform(9)
    expect(findRegimes(Float32Array.from({ length: 10_000 }, () => uniform()), 5000).regimes).toEqual([])
    expect(findRegimes(new Float32Array(20), 5000).regimes).toEqual([])
  })
})

describe('split of a stretch by fit', () => {
  it('equals the exhaustive search', () => {
    const uniform = seededUniform(21)
    for (let trial = 0; trial < 30; trial++) {
      const n = 25
      const cost = 0.4
      const left = Float64Array.from({ length: n }, (_, i) => uniform() * (i < 10 ? 0.5 : 1.5))
      const right = Float64Array.from({ length: n }, (_, i) => uniform() * (i < 14 ? 1.5 : 0.5))
      let best = Number.POSITIVE_INFINITY
      for (let a = 0; a <= n; a++) {
        for (let b = a; b <= n; b++) best = Math.min(best, total(left, right, a, b, cost))
      }
      const { leftEnd, rightStart } = splitByFit(left, right, n, cost)
      expect(total(left, right, leftEnd, rightStart, cost)).toBeCloseTo(best, 10)
    }
  })

  function total(left: Float64Array, right: Float64Array, a: number, b: number, cost: number): number {
    return left.slice(0, a).reduce((s, v) => s + v, 0) + cost * (b - a) + right.slice(b).reduce((s, v) => s + v, 0)
  }
})
