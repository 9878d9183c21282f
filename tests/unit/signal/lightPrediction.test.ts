import { describe, expect, it } from 'vitest'
import { exposureIntegrals } from '../../../jobs/signal/exposureIntegrals'
import { createLightIntegrals, lightAt, predictFrameLight, windowMean } from '../../../jobs/signal/lightPrediction'
import { makeClip, makeRecord, seededUniform } from './synthetic'

/** The integral of the piecewise-linear signal by adding up every bit of trapezoid: slow and plain. */
function plainMean(samples: Float32Array, rate: number, start: number, width: number): number {
  const value = (x: number) => {
    const i = Math.min(Math.floor(x), samples.length - 2)
    return samples[i] + (samples[i + 1] - samples[i]) * (x - i)
  }
  const knots = [start * rate]
  for (let i = Math.floor(start * rate) + 1; i < (start + width) * rate; i++) knots.push(i)
  knots.push((start + width) * rate)
  let sum = 0
  for (let k = 1; k < knots.length; k++) sum += (value(knots[k - 1]) + value(knots[k])) / 2 * (knots[k] - knots[k - 1])
  return sum / (width * rate)
}

describe('window means of a record', () => {
  const uniform = seededUniform(5)
  const samples = Float32Array.from({ length: 1000 }, uniform)

  it('are exact for the signal that is linear between samples, however the window falls', () => {
    const integrals = createLightIntegrals(samples, 1000, 0.25)
    for (let k = 0; k < 300; k++) {
      const start = uniform() * 0.9
      const width = 1e-5 + uniform() * (0.999 - start - 1e-5)
      expect(windowMean(integrals, start, width)).toBeCloseTo(plainMean(samples, 1000, start, width) - 0.25, 9)
    }
    expect(windowMean(integrals, 0, 0.999)).toBeCloseTo(plainMean(samples, 1000, 0, 0.999) - 0.25, 9)
  })

  it('are NaN as soon as the window leaves the record', () => {
    const integrals = createLightIntegrals(samples, 1000)
    expect(windowMean(integrals, -0.001, 0.1)).toBeNaN()
    expect(windowMean(integrals, 0.9, 0.1)).toBeNaN()
    expect(windowMean(integrals, 0.5, 0)).toBeNaN()
    expect(windowMean(integrals, 0.899, 0.1)).not.toBeNaN()
    expect(lightAt(integrals, 1)).toBeNaN()
    expect(lightAt(integrals, 0.0105)).toBeCloseTo((samples[10] + samples[11]) / 2, 6)
  })

  it('predict the light of frames within 1e-4 of the closed form, with offset, drift and dead time', () => {
    const schedule = { states: [{ seconds: 4, level: 1, frequencyHz: 87.3, phaseDeg: 20, depth: 0.8 }] }
    const clip = { frameRateHz: 50, exposureSeconds: 1 / 60, frameCount: 100, offsetSeconds: 0.4, driftPpm: 120, gain: 1, background: 0 }
    const { frameTimesSeconds, frameLight } = makeClip(schedule, clip)
    const integrals = createLightIntegrals(makeRecord(schedule, { sampleRateHz: 10_000, seconds: 4, darkOffset: 0.05 }), 10_000, 0.05)
    const predicted = predictFrameLight(integrals, { ...clip, frameTimesSeconds })
    predicted.forEach((value, k) => expect(Math.abs(value - frameLight[k])).toBeLessThan(1e-4))
  })
})

describe('exposure integrals A, C, S', () => {
  const frequencyHz = 202.37
  const timing = { frameTimesSeconds: Float64Array.from({ length: 60 }, (_, k) => k / 50), exposureSeconds: 1 / 60, offsetSeconds: 0.3337, driftPpm: 80 }

  /** Closed forms of (1/T)∫ L, L cos ωt, L sin ωt for L = 1 + m sin(ωt + φ). */
  function closedForm(depth: number, phase: number) {
    const omega = 2 * Math.PI * frequencyHz
    const sums = { A: 0, C: 0, S: 0 }
    for (const clipTime of timing.frameTimesSeconds) {
      const a = timing.offsetSeconds + (1 + timing.driftPpm * 1e-6) * clipTime
      const b = a + timing.exposureSeconds
      const over = (antiderivative: (t: number) => number) => (antiderivative(b) - antiderivative(a)) / timing.exposureSeconds
      sums.A += over(t => t - depth * Math.cos(omega * t + phase) / omega)
      sums.C += over(t => Math.sin(omega * t) / omega + depth / 2 * (t * Math.sin(phase) - Math.cos(2 * omega * t + phase) / (2 * omega)))
      sums.S += over(t => -Math.cos(omega * t) / omega + depth / 2 * (t * Math.cos(phase) - Math.sin(2 * omega * t + phase) / (2 * omega)))
    }
    return sums
  }

  it.each([5_000, 20_000])('equal the closed form within 0.02 % of A at %s samples a second', (sampleRateHz) => {
    for (const phaseDeg of [0, 90, -37]) {
      const schedule = { states: [{ seconds: 3, level: 1, frequencyHz, phaseDeg, depth: 0.9 }] }
      const integrals = createLightIntegrals(makeRecord(schedule, { sampleRateHz, seconds: 3, darkOffset: 0.1 }), sampleRateHz, 0.1)
      const measured = exposureIntegrals(integrals, timing, { frequencyHz, firstFrame: 0, frameCount: 60 })
      const truth = closedForm(0.9, phaseDeg * Math.PI / 180)
      for (const key of ['A', 'C', 'S'] as const) expect(Math.abs(measured[key] - truth[key])).toBeLessThan(2e-4 * truth.A)
    }
  })

  it('are NaN when a window leaves the record', () => {
    const integrals = createLightIntegrals(new Float32Array(5000).fill(1), 5000)
    expect(exposureIntegrals(integrals, timing, { frequencyHz, firstFrame: 0, frameCount: 60 }).A).toBeNaN()
  })

  it('of a constant lamp are its level times the number of frames', () => {
    const integrals = createLightIntegrals(new Float32Array(15_000).fill(2), 5000, 0.5)
    expect(exposureIntegrals(integrals, timing, { frequencyHz, firstFrame: 3, frameCount: 10 }).A).toBeCloseTo(15, 9)
  })
})
