import { describe, expect, it } from 'vitest'
import { pseudoInverse } from '../../../jobs/imaging/pseudoInverse'
import { solveFrameSet, type FrameSetInput } from '../../../jobs/imaging/solve'
import type { GroupRole } from '../../../shared/measurement'
import { normal, random } from './pictures'

const [width, height] = [70, 61]
const pixels = width * height
const truth = (seed: number) => {
  const next = random(seed)
  return {
    scene: Float64Array.from({ length: pixels }, () => 20_000 + 10_000 * next()),
    p: Float64Array.from({ length: pixels }, () => 500 * normal(next)),
    q: Float64Array.from({ length: pixels }, () => 500 * normal(next)),
    ambient: Float64Array.from({ length: pixels }, () => 40 + 10 * next()),
  }
}

/** Repetitions of dark (if asked), reference, phase 0°, phase 90°, with levels, depths and phases that are not ideal. */
function frameSet(repetitions: number, { noise = 0, dark = false, seed = 1 } = {}): FrameSetInput & { truth: ReturnType<typeof truth> } {
  const next = random(seed + 100)
  const parts = truth(seed)
  const roles: GroupRole[] = []
  const rows: number[] = []
  const frames: number[] = []
  for (let repetition = 0; repetition < repetitions; repetition++) {
    for (const [role, phase] of [...dark ? [['dark', 0] as const] : [], ['reference', 0], ['phase', 0.1], ['phase', Math.PI / 2 + 0.2]] as const) {
      const count = 40 + Math.floor(10 * next())
      const level = role === 'dark' ? 0.002 : 2 + 0.1 * next()
      const depth = role === 'phase' ? 0.6 + 0.1 * next() : 0.001
      roles.push(role)
      frames.push(count)
      rows.push(count * level, count * level * depth / 2 * Math.sin(phase), count * level * depth / 2 * Math.cos(phase))
    }
  }
  const integrals = Float64Array.from(rows)
  const sums = roles.map((_, g) => Uint32Array.from({ length: pixels }, (_, i) =>
    Math.round(rows[3 * g] * parts.scene[i] + rows[3 * g + 1] * parts.p[i] + rows[3 * g + 2] * parts.q[i] + (dark ? frames[g] * parts.ambient[i] : 0) + noise * normal(next))))
  return { sums, roles, integrals, frames, width, height, truth: parts }
}

const largestError = (found: Float32Array, expected: Float64Array) => found.reduce((worst, value, i) => Math.max(worst, Math.abs(value - expected[i])), 0)

describe('solution of a line', () => {
  it('recovers scene, p and q from three groups, with noise not a number', () => {
    const set = frameSet(1)
    const { scene, p, q, noise, degreesOfFreedom, ambient } = solveFrameSet(set)
    expect(largestError(scene, set.truth.scene)).toBeLessThan(0.02)
    expect(largestError(p, set.truth.p)).toBeLessThan(0.1)
    expect(largestError(q, set.truth.q)).toBeLessThan(0.1)
    expect(degreesOfFreedom).toBe(0)
    expect(noise.every(Number.isNaN)).toBe(true)
    expect(ambient).toBeNull()
  })

  it('separates ambient light when dark groups are there', () => {
    const set = frameSet(3, { dark: true })
    const { scene, p, ambient, degreesOfFreedom } = solveFrameSet(set)
    expect(largestError(scene, set.truth.scene)).toBeLessThan(0.05)
    expect(largestError(p, set.truth.p)).toBeLessThan(0.1)
    expect(largestError(ambient!, set.truth.ambient)).toBeLessThan(0.1)
    expect(degreesOfFreedom).toBe(12 - 4)
  })

  it('shows the noise of a sum, unbiased, and the scatter that it causes in p', () => {
    const set = frameSet(5, { noise: 300 })
    const { noise, p, covariance, residualRms } = solveFrameSet(set)
    const meanSquare = noise.reduce((sum, value) => sum + value ** 2, 0) / pixels
    expect(Math.sqrt(meanSquare) / 300).toBeCloseTo(1, 1)
    const scatter = Math.sqrt(p.reduce((sum, value, i) => sum + (value - set.truth.p[i]) ** 2, 0) / pixels)
    expect(scatter / (300 * Math.sqrt(covariance[4]))).toBeCloseTo(1, 1)
    for (const rms of residualRms) expect(rms / 300).toBeCloseTo(1, 1)
  })

  it('leaves rejected groups out, as if they were not there', () => {
    const set = frameSet(4, { noise: 100 })
    const accepted = set.roles.map((_, g) => g < 3 || g >= 6)
    const kept = (list: number[]) => list.filter(g => accepted[g])
    const fewer = solveFrameSet({ ...set, accepted })
    const order = kept([...set.roles.keys()])
    const alone = solveFrameSet({ ...set, sums: order.map(g => set.sums[g]), roles: order.map(g => set.roles[g]), frames: order.map(g => set.frames[g]), integrals: Float64Array.from(order.flatMap(g => [...set.integrals.subarray(3 * g, 3 * g + 3)])) })
    expect(fewer.p).toEqual(alone.p)
    expect(fewer.noise).toEqual(alone.noise)
    expect([...fewer.residualRms].map(Number.isNaN)).toEqual(accepted.map(used => !used))
  })

  it('marks the repetition that disagrees by its residual', () => {
    const set = frameSet(5, { noise: 100 })
    set.sums[4] = set.sums[4].map((value, i) => value + (i % 2 ? 3000 : -3000))
    const { residualRms } = solveFrameSet(set)
    expect([...residualRms].indexOf(Math.max(...residualRms))).toBe(4)
  })

  it('is refused, saying what is missing, without a second phase', () => {
    const set = frameSet(2)
    const accepted = set.roles.map((_, g) => g % 3 !== 2)
    set.roles = set.roles.map((role, g) => g % 3 === 2 ? 'reference' : role)
    expect(() => solveFrameSet({ ...frameSet(1), accepted: [true, true, false] })).toThrow(expect.objectContaining({ code: 'too-few-groups', message: expect.stringMatching(/at least two phase groups; 1 and 1 are accepted/) }))
    expect(() => solveFrameSet({ ...frameSet(2), accepted })).toThrow(expect.objectContaining({ code: 'ill-conditioned' }))
  })

  it('is refused when a group lies outside the record', () => {
    const set = frameSet(2)
    set.integrals[3] = Number.NaN
    expect(() => solveFrameSet(set)).toThrow(/not lie wholly within the record/)
  })

  it('has the condition number 6.34 of an ideal fully modulated set', () => {
    // Closed form: Gram matrix [[3, ½, ½], [½, ¼, 0], [½, 0, ¼]], eigenvalues 13/8 ± √(11²/64 + ½).
    const set = frameSet(1)
    set.integrals.set([100, 0, 0, 100, 50, 0, 100, 0, 50])
    const root = Math.sqrt(121 / 64 + 0.5)
    expect(solveFrameSet(set).conditionNumber).toBeCloseTo(Math.sqrt((13 / 8 + root) / (13 / 8 - root)), 9)
  })
})

describe('pseudo-inverse', () => {
  it('times the matrix is the identity, for columns in very different units', () => {
    const next = random(3)
    const matrix = Float64Array.from({ length: 9 * 4 }, (_, i) => (next() - 0.5) * [1e6, 1, 1e-3, 50][i % 4])
    const { inverse } = pseudoInverse(matrix, 9, 4)!
    for (let row = 0; row < 4; row++) {
      for (let column = 0; column < 4; column++) {
        let sum = 0
        let scale = 0
        for (let k = 0; k < 9; k++) {
          sum += inverse[row * 9 + k] * matrix[k * 4 + column]
          scale += Math.abs(inverse[row * 9 + k] * matrix[k * 4 + column])
        }
        expect(Math.abs(sum - (row === column ? 1 : 0))).toBeLessThan(1e-12 * (1 + scale))
      }
    }
  })

  it('is null for a singular matrix', () => {
    expect(pseudoInverse([1, 2, 2, 4, 3, 6], 3, 2)).toBeNull()
    expect(pseudoInverse([1, 2], 1, 2)).toBeNull()
  })
})
