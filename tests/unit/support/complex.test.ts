import { describe, expect, it } from 'vitest'
import { exponentialIntegral, type Complex } from '../../support/forward/complex'

/** ∫ e^{λτ} dτ from 0 to `length` by midpoints. */
function byMidpoints([real, imaginary]: Complex, length: number): Complex {
  const steps = 20_000
  let sums = [0, 0]
  for (let i = 0; i < steps; i++) {
    const at = (i + 0.5) / steps * length
    const size = Math.exp(real * at) * length / steps
    sums = [sums[0]! + size * Math.cos(imaginary * at), sums[1]! + size * Math.sin(imaginary * at)]
  }
  return [sums[0]!, sums[1]!]
}

describe('integral of an exponential', () => {
  it.each([[0, 0], [-0.3, 0], [0, 0.45], [-0.2, 0.4], [0, 0.499], [0, 0.501], [-30, 1200], [0, -1200]] as const)('is right for a rate of %s + %sj, by series or not', (...rate) => {
    const [real, imaginary] = exponentialIntegral(rate, 0.02)
    const [expectedReal, expectedImaginary] = byMidpoints(rate, 0.02)
    expect(real / 0.02).toBeCloseTo(expectedReal / 0.02, 7)
    expect(imaginary / 0.02).toBeCloseTo(expectedImaginary / 0.02, 7)
  })
})
