import { writeFileSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { writeNpz } from '../../jobs/formats/npz'
import { pseudoInverse } from '../../jobs/imaging/pseudoInverse'
import { solveFrameSet } from '../../jobs/imaging/solve'
import type { GroupRole } from '../../shared/measurement'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()
const [width, height] = [37, 29]
const pixels = width * height

/** Lattice values instead of random ones: both sides can make them. */
function inputs(dark: boolean) {
  const roles: GroupRole[] = []
  const rows: number[] = []
  const frames: number[] = []
  for (let repetition = 0; repetition < 4; repetition++) {
    for (const role of [...dark ? ['dark'] as const : [], 'reference', 'phase', 'phase'] as const) {
      const g = roles.push(role) - 1
      frames.push(40 + (g * 7) % 11)
      const level = role === 'dark' ? 0.3 : 3 + 0.01 * g
      const phase = g % 2 ? 0.3 : 1.9
      const depth = role === 'phase' ? 0.7 : 0.01
      rows.push(frames[g] * level, frames[g] * level * depth / 2 * Math.sin(phase), frames[g] * level * depth / 2 * Math.cos(phase))
    }
  }
  const sums = roles.map((_, g) => Uint32Array.from({ length: pixels }, (_, i) => Math.round(rows[3 * g] * (20_000 + 31 * (i % 101)) + rows[3 * g + 1] * (i % 53 - 26) * 20 + rows[3 * g + 2] * (i % 29 - 14) * 35 + frames[g] * 60 + (g * 2_654_435_761 + i * 40_503) % 2000)))
  const all = new Uint32Array(sums.length * pixels)
  sums.forEach((sum, g) => all.set(sum, g * pixels))
  writeFileSync(path('set.npz'), writeNpz({ sums: { dtype: 'uint32', shape: [sums.length, height, width], data: all }, integrals: { dtype: 'float64', shape: [sums.length, 3], data: Float64Array.from(rows) }, frames: { dtype: 'int32', shape: [sums.length], data: Int32Array.from(frames) } }))
  return { roles, sums, integrals: Float64Array.from(rows), frames, width, height }
}

describe.each([[false, 3], [true, 4]])('solution with dark groups: %s', (dark, columns) => {
  it('equals numpy.linalg.lstsq at every pixel, noise and condition number included', () => {
    const input = inputs(dark)
    const solution = solveFrameSet(input)
    const theirs = python<{ x: number[][], noise: number[], condition: number, covariance: number[] }>(`
z = np.load('set.npz'); M = z['integrals']; N = z['frames'][:, None].astype(float); I = z['sums'].reshape(len(M), -1).astype(float)
lit = M[:, 0] > 30
condition = float(np.linalg.cond(M[lit]))
if ${columns} == 4: M = np.hstack([M, N])
x, rss, rank, _ = np.linalg.lstsq(M, I, rcond=None)
r = I - M @ x
hat = np.diag(M @ np.linalg.pinv(M))
noise = np.sqrt((r[lit] ** 2).sum(0) / (1 - hat[lit]).sum())
print(json.dumps({'x': x.tolist(), 'noise': noise.tolist(), 'condition': condition, 'covariance': np.linalg.inv(M.T @ M).ravel().tolist()}))`)
    const ours = [solution.scene, solution.p, solution.q, ...solution.ambient ? [solution.ambient] : []]
    expect(ours.length).toBe(columns)
    ours.forEach((image, k) => {
      const scale = Math.max(...theirs.x[k].map(Math.abs))
      // float32 keeps seven digits.
      for (let i = 0; i < pixels; i++) expect(Math.abs(image[i] - theirs.x[k][i])).toBeLessThan(3e-7 * scale)
    })
    for (let i = 0; i < pixels; i++) expect(Math.abs(solution.noise[i] / theirs.noise[i] - 1)).toBeLessThan(1e-6)
    expect(solution.conditionNumber / theirs.condition).toBeCloseTo(1, 9)
    solution.covariance.forEach((value, i) => expect(Math.abs(value - theirs.covariance[i])).toBeLessThan(1e-9 * Math.max(...theirs.covariance.map(Math.abs))))
  })
})

it('the pseudo-inverse equals numpy.linalg.pinv, its singular values those of numpy.linalg.svd', () => {
  const theirs = python<{ matrix: number[], inverse: number[], values: number[] }>(`
rng = np.random.default_rng(11); m = rng.normal(size=(12, 4)) * [1e4, 1, 1e-2, 30]
print(json.dumps({'matrix': m.ravel().tolist(), 'inverse': np.linalg.pinv(m).ravel().tolist(), 'values': np.linalg.svd(m)[1].tolist()}))`)
  const { inverse, singularValues } = pseudoInverse(theirs.matrix, 12, 4)!
  inverse.forEach((value, i) => expect(Math.abs(value - theirs.inverse[i])).toBeLessThan(1e-10 * Math.max(...theirs.inverse.slice(12 * Math.floor(i / 12), 12 * Math.floor(i / 12) + 12).map(Math.abs))))
  singularValues.forEach((value, i) => expect(value / theirs.values[i]).toBeCloseTo(1, 9))
})
