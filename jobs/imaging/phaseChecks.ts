import type { CheckResult } from '../../shared/checks'
import { judge, unmeasured } from './checkResult'
import type { CheckInput } from './checks'

const radian = 180 / Math.PI

/** Depth, distortion, quadrature and whole periods of one repetition's groups (indices into the line's groups). */
export function phaseChecks(input: CheckInput, repetition: number, lit: readonly number[]): CheckResult[] {
  const { groups } = input
  const phases = lit.filter(g => groups[g].role === 'phase')
  const depths = phases.flatMap(g => groups[g].depth ?? [])
  const distortions = phases.flatMap(g => groups[g].distortion ?? [])
  const results = [
    depths.length ? judge('depth', repetition, 100 * Math.min(...depths)) : unmeasured('depth', repetition, 'The lamp’s depth was not measured.'),
    quadrature(input, repetition, phases),
    wholePeriods(input, repetition, lit),
  ]
  if (distortions.length) results.splice(1, 0, judge('distortion', repetition, 100 * Math.max(...distortions)))
  return results
}

/** How far the two phases that are nearest to a quarter period apart, or to three, miss it. */
function quadrature({ groups, integrals }: CheckInput, repetition: number, phases: readonly number[]): CheckResult {
  const angles = phases.map(g => groups[g].lampPhaseDeg ?? radian * Math.atan2(integrals[3 * g + 1], integrals[3 * g + 2]))
  let least = Infinity
  for (let i = 0; i < angles.length; i++) {
    for (let k = 0; k < i; k++) least = Math.min(least, Math.abs(90 - angleBetween(angles[i], angles[k])))
  }
  return least === Infinity ? unmeasured('quadrature-error', repetition, 'This repetition has fewer than two phase groups. Accept it only beside complete ones.') : judge('quadrature-error', repetition, least)
}

/** 0…180. */
function angleBetween(a: number, b: number): number {
  const turn = Math.abs(a - b) % 360
  return turn > 180 ? 360 - turn : turn
}

/**
 * The cut's own figure of each phase group when it is given; else what the reference lets through where whole periods
 * would give nothing, |C + jS| / A.
 */
function wholePeriods({ groups, integrals, wholePeriodErrors }: CheckInput, repetition: number, lit: readonly number[]): CheckResult {
  const given = lit.flatMap(g => wholePeriodErrors?.[g] ?? [])
  const errors = given.length ? given : lit.filter(g => groups[g].role === 'reference').map(g => Math.hypot(integrals[3 * g + 1], integrals[3 * g + 2]) / integrals[3 * g])
  return errors.length && errors.every(Number.isFinite) ? judge('whole-period-error', repetition, 100 * Math.max(...errors)) : unmeasured('whole-period-error', repetition, 'This repetition has no reference inside the record to measure it by.')
}
