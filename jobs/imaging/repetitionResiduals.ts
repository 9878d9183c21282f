import type { Group } from '../../shared/measurement'
import { planSolution, SolveError, type SolvePlan } from './solve'

/**
 * Products of the sums with one another over a sample of pixels: all that residuals of any choice of groups need.
 *
 * @param samples of each group, the same pixels
 * @returns [G, G] row-major, Σ I_g·I_h
 */
export function gramOfSums(samples: readonly ArrayLike<number>[]): Float64Array {
  const count = samples.length
  const gram = new Float64Array(count * count)
  for (let g = 0; g < count; g++) {
    for (let h = 0; h <= g; h++) {
      let sum = 0
      for (let i = 0; i < samples[g].length; i++) sum += samples[g][i] * samples[h][i]
      gram[g * count + h] = gram[h * count + g] = sum
    }
  }
  return gram
}

/**
 * How much each repetition disagrees with the others: rms of its sums against what the *other* accepted repetitions
 * predict for its integrals, over the rms that their own scatter makes expect. About 1 for a good repetition, whatever the noise.
 * As the repetition has no part in the prediction, even one bad one in three stands out.
 *
 * @param groups with `accepted` as it is to be judged; a rejected repetition is held against the accepted ones
 * @param integrals [G, 3] row-major: A, C, S in record units
 * @param gram of the same groups, see `gramOfSums`
 * @returns repetition → ratio; null where the others are too few to predict and to scatter (two complete ones are needed)
 * Source: externally studentised residuals (Cook & Weisberg 1982), pooled over pixels and over the groups of a repetition.
 */
export function repetitionResiduals(groups: readonly Group[], integrals: Float64Array, gram: Float64Array): Map<number, number | null> {
  const lit = groups.flatMap((group, g) => group.role !== 'dark' && group.frameCount > 0 ? [g] : [])
  const repetitions = [...new Set(lit.map(g => groups[g].repetition))].sort((a, b) => a - b)
  return new Map(repetitions.map((repetition) => {
    const plan = planOfOthers(groups, integrals, repetition)
    const own = lit.filter(g => groups[g].repetition === repetition && Number.isFinite(integrals[3 * g]))
    if (!plan || !plan.litFreedom || !own.length) return [repetition, null]
    const expected = scatter(plan, groups.length, gram)
    const found = own.reduce((sum, g) => sum + predictionError(plan, groups, integrals, gram, g), 0) / own.length
    return [repetition, expected > 0 && found >= 0 ? Math.sqrt(found / expected) : null]
  }))
}

function planOfOthers(groups: readonly Group[], integrals: Float64Array, repetition: number): SolvePlan | null {
  try {
    return planSolution({ roles: groups.map(group => group.role), integrals, frames: groups.map(group => group.frameCount), accepted: groups.map(group => group.accepted && (group.repetition !== repetition || group.role === 'dark')) })
  } catch (error) {
    if (error instanceof SolveError) return null
    throw error
  }
}

/** Variance of one lit sum, from the residuals of the plan's own lit groups; times the pixels of the sample. */
function scatter({ used, matrix, inverse, columns, litRows, litFreedom }: SolvePlan, count: number, gram: Float64Array): number {
  const squares = litRows.reduce((sum, row) => {
    const weights = new Float64Array(count)
    weights[used[row]] = 1
    for (let column = 0; column < used.length; column++) for (let k = 0; k < columns; k++) weights[used[column]] -= matrix[row * columns + k] * inverse[k * used.length + column]
    return sum + quadratic(weights, gram)
  }, 0)
  return squares / litFreedom
}

function quadratic(weights: Float64Array, gram: Float64Array): number {
  const count = weights.length
  let sum = 0
  for (let a = 0; a < count; a++) for (let b = 0; b < count; b++) sum += weights[a] * weights[b] * gram[a * count + b]
  return sum
}

/** Mean square of group g minus its prediction, over what the prediction's own variance adds; times the pixels of the sample. */
function predictionError({ used, inverse, columns, covariance }: SolvePlan, groups: readonly Group[], integrals: Float64Array, gram: Float64Array, g: number): number {
  const count = groups.length
  const row = [integrals[3 * g], integrals[3 * g + 1], integrals[3 * g + 2], groups[g].frameCount].slice(0, columns)
  const weights = new Float64Array(count)
  weights[g] = 1
  used.forEach((other, column) => row.forEach((value, k) => weights[other] -= value * inverse[k * used.length + column]))
  const variance = row.reduce((sum, value, a) => sum + row.reduce((inner, other, b) => inner + value * other * covariance[a * columns + b], 0), 0)
  return quadratic(weights, gram) / (1 + variance)
}
