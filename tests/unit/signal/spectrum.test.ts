import { describe, expect, it } from 'vitest'
import { dominantTone, fft, inverseFft, powerOfTwo } from '../../../jobs/signal/spectrum'
import { seededNormal } from './synthetic'

describe('fast Fourier transform', () => {
  it('equals the sum of its definition', () => {
    const normal = seededNormal(3)
    const n = 32
    const x = Float64Array.from({ length: n }, normal)
    const y = Float64Array.from({ length: n }, normal)
    const re = x.slice(), im = y.slice()
    fft(re, im)
    for (let k = 0; k < n; k++) {
      let a = 0, b = 0
      for (let i = 0; i < n; i++) {
        const angle = -2 * Math.PI * k * i / n
        a += x[i] * Math.cos(angle) - y[i] * Math.sin(angle)
        b += x[i] * Math.sin(angle) + y[i] * Math.cos(angle)
      }
      expect(re[k]).toBeCloseTo(a, 10)
      expect(im[k]).toBeCloseTo(b, 10)
    }
    inverseFft(re, im)
    for (let i = 0; i < n; i++) expect(re[i]).toBeCloseTo(x[i], 12)
  })

  it('refuses lengths that are no power of two', () => {
    expect(() => fft(new Float64Array(12), new Float64Array(12))).toThrow(RangeError)
    expect(powerOfTwo(1000)).toBe(1024)
  })
})

describe('dominant tone', () => {
  it.each([[12.3, 5], [61.7, 30], [202.37, 0], [1203.3, 90]])('is within a twentieth of 1/duration at %s Hz', (hz, phaseDeg) => {
    const rate = 10_000
    const samples = Float64Array.from({ length: 4000 }, (_, i) => 3 + 0.5 * Math.sin(2 * Math.PI * hz * i / rate + phaseDeg))
    const tone = dominantTone(samples, rate, { first: 0, count: 4000 })!
    expect(Math.abs(tone.frequencyHz - hz)).toBeLessThan(0.05 * rate / 4000)
    expect(tone.amplitude).toBeCloseTo(0.5, 1)
  })
})
