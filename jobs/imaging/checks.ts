import type { CheckResult } from '../../shared/checks'
import type { Group } from '../../shared/measurement'
import type { RepetitionMotion } from './cameraMotion'
import { judge, unmeasured } from './checkResult'
import { lightChecks, type MeterColumns } from './lightChecks'
import { phaseChecks } from './phaseChecks'
import { repetitionResiduals } from './repetitionResiduals'

/** Everything of one line that does not depend on which repetitions are accepted; arrays per group are in the order of `groups`. */
export interface CheckInput {
  groups: readonly Group[]
  meter: MeterColumns
  /** [G, 3] row-major: A, C, S in record units. */
  integrals: Float64Array
  /** Of each repetition, see `repetitionMotion`. */
  motion: ReadonlyMap<number, RepetitionMotion>
  /** Whole-period error of each group as the cut chose it. */
  wholePeriodErrors?: readonly (number | null)[]
}

/** Checks of every repetition against `shared/checks.ts` that stay when others are rejected: light, lamp, camera. */
export function repetitionChecks(input: CheckInput): CheckResult[] {
  const { groups, motion } = input
  return [...motion.keys()].sort((a, b) => a - b).flatMap((repetition) => {
    const lit = groups.flatMap((group, g) => group.repetition === repetition && group.role !== 'dark' && group.frameCount > 0 ? [g] : [])
    return [...lightChecks(input, repetition, lit), ...phaseChecks(input, repetition, lit), motionCheck(repetition, motion.get(repetition)!)]
  })
}

function motionCheck(repetition: number, { distance, matched }: RepetitionMotion): CheckResult {
  if (!matched) return unmeasured('camera-motion', repetition, 'The pictures of this repetition cannot be matched with the others: the camera moved far, or the scene has no texture. Reject the repetition.', false)
  return distance === null ? unmeasured('camera-motion', repetition, 'There is no other repetition to compare the pictures with.') : judge('camera-motion', repetition, distance)
}

/** Residual of each repetition against the other accepted ones; see `repetitionResiduals`. */
export function residualChecks(groups: readonly Group[], integrals: Float64Array, gram: Float64Array): CheckResult[] {
  return [...repetitionResiduals(groups, integrals, gram)].map(([repetition, ratio]) => ratio === null ? unmeasured('residual', repetition, 'Two other accepted repetitions are needed to compare with.') : judge('residual', repetition, ratio))
}

/** Of the line as it was solved. @param noiseShare median noise of a sum over the median sum, 0…1; null when one repetition does not show it */
export function lineChecks(conditionNumber: number, noiseShare: number | null): CheckResult[] {
  return [
    judge('conditioning', null, conditionNumber),
    noiseShare === null ? unmeasured('noise', null, 'One repetition does not show the noise. Shoot at least two.') : judge('noise', null, 100 * noiseShare),
  ]
}

/** In order of repetitions, those of the line last; what comes later in a list stays later. */
export function inOrder(...lists: readonly CheckResult[][]): CheckResult[] {
  return lists.flat().sort((a, b) => (a.repetition ?? Infinity) - (b.repetition ?? Infinity) || 0)
}
