import { describe, expect, it } from 'vitest'
import { alignClip, AlignError, judgeAlignment, type AlignInput } from '../../../jobs/signal/align'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { makeClip, makeRecord, scheduleEnd, seededNormal, seededUniform, usualSchedule, type ClipOptions, type RecordOptions, type Schedule } from './synthetic'

function align(schedule: Schedule, record: RecordOptions, clip: ClipOptions, more: Partial<AlignInput> = {}) {
  const input = { ...makeClip(schedule, clip), exposureSeconds: clip.exposureSeconds, illumination: makeRecord(schedule, record), sampleRateHz: record.sampleRateHz, darkLevel: null }
  const result = alignClip({ ...input, ...more })
  return {
    ...result,
    offsetErrorFrames: Math.abs(result.offsetSeconds - clip.offsetSeconds) * clip.frameRateHz,
    driftErrorPpm: Math.abs(result.driftPpm - (clip.driftPpm ?? 0)),
  }
}

function lively(seed: number, frequenciesHz: number[], seconds = 2, repetitions = 2, startSeconds = 2.3): Schedule {
  const uniform = seededUniform(seed)
  return usualSchedule({ frequenciesHz, repetitions, seconds, darkSeconds: 0.5, startSeconds, jitter: () => 0.3 * uniform() })
}

describe('alignment of a clip of 26 s', () => {
  const schedule = lively(11, [202.3, 415.7])
  const record = { sampleRateHz: 10_000, seconds: scheduleEnd(schedule) + 3, noise: 0.01 }
  const clip = { frameRateHz: 50, exposureSeconds: 1 / 50, frameCount: 1300, offsetSeconds: 1.23456, driftPpm: 37, noise: 0.002 }

  const cases: [string, Partial<RecordOptions>, Partial<ClipOptions>][] = [
    ['50 frames/s, exposure the whole interval', {}, {}],
    ['a negative offset: the record begins after the clip', {}, { offsetSeconds: -2.3456 }],
    ['29.97 frames/s', { sampleRateHz: 5000 }, { frameRateHz: 30_000 / 1001, exposureSeconds: 1001 / 30_000, frameCount: 780 }],
    ['dead time: exposure 1/60 s at 50 frames/s', {}, { exposureSeconds: 1 / 60 }],
    ['drift +100 ppm', {}, { driftPpm: 100 }],
    ['drift −100 ppm', {}, { driftPpm: -100 }],
    ['a record that ends 8 s before the clip', { seconds: 20 }, {}],
    ['a record at 100 kHz', { sampleRateHz: 100_000, seconds: 28 }, {}],
  ]
  it.each(cases)('is within 0.01 frame and 3 ppm, and sure: %s', (_, recordChange, clipChange) => {
    const found = align(schedule, { ...record, ...recordChange }, { ...clip, ...clipChange })
    expect(found.offsetErrorFrames).toBeLessThan(0.01)
    expect(found.driftErrorPpm).toBeLessThan(3)
    expect(found.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(found.residual).toBeLessThan(0.01)
  })

  it('predicts the light of every covered frame in the unit of the measurement, NaN for the others', () => {
    const { predicted, evidence } = align(schedule, { ...record, darkOffset: 0.1 }, { ...clip, noise: 0, gain: 0.6, background: 0.013 }, { darkLevel: 0.1 })
    const { frameLight } = makeClip(schedule, { ...clip, noise: 0, gain: 0.6, background: 0.013 })
    let worst = 0
    predicted.forEach((value, k) => {
      worst = Math.max(worst, Math.abs(value - frameLight[k]))
    })
    expect(worst).toBeLessThan(0.01)
    expect(evidence.gain).toBeCloseTo(0.6, 3)
    expect(evidence.background).toBeCloseTo(0.013, 3)
    const late = align(schedule, record, { ...clip, offsetSeconds: -2 })
    expect(late.predicted.slice(0, 99).every(Number.isNaN)).toBe(true)
    expect(late.predicted.slice(101).some(Number.isNaN)).toBe(false)
  })

  it('is not led astray by slow drift of the gain, flashes in single frames, a slightly wrong transfer, frames without light', () => {
    const { frameLight, frameTimesSeconds } = makeClip(schedule, clip)
    const uniform = seededUniform(2)
    for (let k = 0; k < frameLight.length; k++) frameLight[k] = (frameLight[k] * (1 + 0.05 * k / frameLight.length)) ** 0.97
    for (let n = 0; n < 3; n++) frameLight[300 + Math.floor(uniform() * 200)] += 0.3
    frameLight[700] = Number.NaN
    const found = align(schedule, record, clip, { frameLight, frameTimesSeconds })
    expect(found.offsetErrorFrames).toBeLessThan(0.01)
    expect(found.driftErrorPpm).toBeLessThan(3)
    expect(found.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(found.evidence.reasons.join(' ')).toContain('were left out of the fit')
  })
})

describe('confidence of an alignment', () => {
  const record = { sampleRateHz: 10_000, noise: 0.005 }
  const clip = { frameRateHz: 50, exposureSeconds: 1 / 50, offsetSeconds: 0.4, driftPpm: 20, noise: 0.002 }

  it('without edges and with whole periods in each exposure is low and says why', () => {
    const schedule = { ...usualSchedule({ frequenciesHz: [200], repetitions: 3, seconds: 2 }), restLevel: 1 }
    const found = align(schedule, { ...record, seconds: 19 }, { ...clip, frameCount: 900 })
    expect(found.confidence).toBeLessThan(alignmentReviewBelow)
    expect(found.evidence.beat).toBe(false)
    expect(found.evidence.edges).toBe(0)
    expect(found.evidence.reasons[0]).toMatch(/whole number of periods in each exposure \(200\.0 Hz, 4 periods\).*nothing ties/)
  })

  it('with whole periods in each exposure and edges says that only the edges tie', () => {
    const schedule = lively(4, [200], 2, 3, 1)
    const found = align(schedule, { ...record, seconds: scheduleEnd(schedule) + 2 }, { ...clip, frameCount: 1050 })
    expect(found.offsetErrorFrames).toBeLessThan(0.01)
    expect(found.evidence.beat).toBe(false)
    expect(found.evidence.reasons[0]).toMatch(/whole number of periods.*only 2 lamp edges/)
    expect(found.confidence).toBeGreaterThan(alignmentReviewBelow)
  })

  it('with a beat alone finds the offset and stays below that of a clip with edges', () => {
    const schedule = { ...lively(3, [202.3], 2, 3, 0.1), restLevel: 1 }
    for (const state of schedule.states) state.level = 1
    const found = align(schedule, { ...record, seconds: scheduleEnd(schedule) + 1 }, { ...clip, frameCount: 900 })
    expect(found.offsetErrorFrames).toBeLessThan(0.01)
    expect(found.evidence).toMatchObject({ edges: 0, beat: true })
    expect(found.confidence).toBeLessThan(0.8)
  })

  it('for clip and record of different shots is low', () => {
    for (let seed = 1; seed <= 4; seed++) {
      const filmed = lively(seed, [202.3, 415.7])
      const recorded = lively(seed + 50, seed % 2 ? [202.3, 415.7] : [120.4, 333.1], 1.9)
      const illumination = makeRecord(recorded, { ...record, seconds: scheduleEnd(recorded) + 2 })
      expect(align(filmed, { ...record, seconds: 1 }, { ...clip, frameCount: 1200 }, { illumination }).confidence).toBeLessThan(0.3)
    }
  })

  it('for a clip that fits at two places of a periodic record is low and names the other offset', () => {
    const states = Array.from({ length: 6 }, () => usualSchedule({ frequenciesHz: [200], repetitions: 1, seconds: 1.5, darkSeconds: 0.5 }).states).flat()
    const found = align({ states, startSeconds: 0.5 }, { ...record, seconds: 34 }, { ...clip, frameCount: 600, offsetSeconds: 4 })
    expect(found.confidence).toBeLessThan(0.3)
    expect(found.evidence.reasons.join(' ')).toMatch(/fits nearly as well/)
    const shots = (found.evidence.secondBestOffsetSeconds! - found.offsetSeconds) / 5.5
    expect(Math.abs(shots - Math.round(shots))).toBeLessThan(0.01)
    expect(Math.round(shots)).not.toBe(0)
  })

  it('for a dark lamp or a clip of one level is 0, and a clip of a few frames is refused', () => {
    const schedule = lively(1, [202.3])
    const times = Float64Array.from({ length: 500 }, (_, k) => k / 50)
    const normal = seededNormal(1)
    const level = times.map(() => 0.5)
    const noisy = times.map(() => 0.5 + 0.001 * normal())
    for (const frameLight of [level, noisy]) {
      const found = align(schedule, { ...record, seconds: 20 }, { ...clip, frameCount: 500 }, { frameLight, frameTimesSeconds: times })
      expect(found.confidence).toBeLessThan(0.1)
      expect(found.residual).toBeGreaterThan(0.3)
    }
    expect(align(schedule, { ...record, seconds: 20 }, { ...clip, frameCount: 500 }, { illumination: new Float32Array(200_000) }).confidence).toBeLessThan(0.1)
    expect(() => align(schedule, { ...record, seconds: 20 }, { ...clip, frameCount: 5 })).toThrow(AlignError)
  })
})

describe('an alignment set by hand', () => {
  const schedule = lively(11, [202.3], 1.5, 2, 1)
  const clip = { frameRateHz: 50, exposureSeconds: 1 / 50, frameCount: 500, offsetSeconds: 0.4, driftPpm: 20, noise: 0.002 }
  const input = { ...makeClip(schedule, clip), exposureSeconds: 1 / 50, illumination: makeRecord(schedule, { sampleRateHz: 10_000, seconds: 13 }), sampleRateHz: 10_000, darkLevel: null }

  it('is kept as it is, judged, and a better one near it is named', () => {
    const right = judgeAlignment(input, { offsetSeconds: 0.4, driftPpm: 20, version: 4 })
    expect(right).toMatchObject({ offsetSeconds: 0.4, driftPpm: 20, method: 'manual', version: 4 })
    expect(right.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(right.residual).toBeLessThan(0.005)
    const off = judgeAlignment(input, { offsetSeconds: 0.401, driftPpm: 20 })
    expect(off.offsetSeconds).toBe(0.401)
    expect(off.residual).toBeGreaterThan(right.residual * 1.2)
    expect(off.evidence.reasons.join(' ')).toMatch(/better fit lies near: offset 0\.4000 s/)
  })

  it('that leaves the record has confidence 0 and says so', () => {
    const found = judgeAlignment(input, { offsetSeconds: -50, driftPpm: 0 })
    expect(found).toMatchObject({ confidence: 0, residual: 1 })
    expect(found.predicted.every(Number.isNaN)).toBe(true)
  })
})

describe('alignment over seeds', () => {
  it('20 random clips of 4 to 80 s, 25 to 60 frames/s, all within 0.01 frame; 3 ppm from 20 s on', () => {
    const uniform = seededUniform(2024)
    const pick = <T>(list: T[]) => list[Math.floor(uniform() * list.length)]
    const worst = { offsetFrames: 0, driftPpm: 0, confidence: 1 }
    for (let k = 0; k < 20; k++) {
      const frameRateHz = pick([25, 30_000 / 1001, 50, 60])
      const exposureSeconds = pick([1, 0.9, 5 / 6]) / frameRateHz
      const frequenciesHz = Array.from({ length: 1 + Math.floor(3 * uniform()) }, () => Math.round((20 + 500 * uniform() ** 2) * 100) / 100)
      const schedule: Schedule = usualSchedule({
        frequenciesHz, repetitions: 1 + Math.floor(3 * uniform()), seconds: 0.8 + 2 * uniform(), darkSeconds: uniform() < 0.7 ? 0.3 + uniform() : 0,
        startSeconds: 3 * uniform(), jitter: () => 0.2 * uniform(), depth: 0.5 + 0.5 * uniform(), levels: frequenciesHz.map(() => 0.5 + 0.5 * uniform()),
      })
      if (uniform() < 0.6) schedule.ripple = { depth: 0.03 * uniform(), frequencyHz: 100 }
      const end = scheduleEnd(schedule)
      const offsetSeconds = -2 + 4 * uniform()
      const record = { sampleRateHz: pick([5000, 10_000, 20_000]), seconds: end + 2 * (uniform() - 0.3), noise: 0.01 * uniform(), darkOffset: 0.02 * uniform(), seed: k + 1 }
      const clip = { frameRateHz, exposureSeconds, frameCount: Math.floor((end - offsetSeconds + uniform()) * frameRateHz), offsetSeconds, driftPpm: 300 * (uniform() - 0.5), noise: 0.002 * uniform(), seed: k + 1 }
      const found = align(schedule, record, clip)
      worst.offsetFrames = Math.max(worst.offsetFrames, found.offsetErrorFrames)
      if (clip.frameCount / frameRateHz >= 20) worst.driftPpm = Math.max(worst.driftPpm, found.driftErrorPpm)
      worst.confidence = Math.min(worst.confidence, found.confidence)
    }
    console.info(`alignment, worst of 20: ${worst.offsetFrames.toFixed(4)} frame, ${worst.driftPpm.toFixed(2)} ppm, confidence ${worst.confidence.toFixed(2)}`)
    expect(worst.offsetFrames).toBeLessThan(0.01)
    expect(worst.driftPpm).toBeLessThan(3)
    expect(worst.confidence).toBeGreaterThan(alignmentReviewBelow)
  }, 120_000)

  it('a clip of 8 minutes, aligned on a first stretch and then on the whole, is within 0.01 frame and 0.1 ppm', () => {
    const uniform = seededUniform(8)
    const schedule = usualSchedule({ frequenciesHz: [61.1, 120.7, 412.9], repetitions: 4, seconds: 13, startSeconds: 2, jitter: () => uniform(), levels: [1, 0.7, 0.9] })
    const end = scheduleEnd(schedule)
    const found = align(schedule, { sampleRateHz: 5000, seconds: end + 3, noise: 0.01 }, { frameRateHz: 50, exposureSeconds: 1 / 55, frameCount: Math.floor(end * 50), offsetSeconds: 0.77, driftPpm: -177, noise: 0.002 })
    expect(found.offsetErrorFrames).toBeLessThan(0.01)
    expect(found.driftErrorPpm).toBeLessThan(0.1)
  }, 120_000)
})
