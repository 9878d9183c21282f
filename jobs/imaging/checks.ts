import type { CheckResult } from '../../shared/checks'
import type { Group } from '../../shared/measurement'
import { repetitionMotion } from './cameraMotion'
import { judge, unmeasured } from './checkResult'
import { lightChecks, type MeterColumns } from './lightChecks'
import { phaseChecks } from './phaseChecks'
import type { FrameSetSolution } from './solve'

export { proposeRejections } from './rejections'

/** Everything of one line; arrays per group are in the order of `groups`. */
export interface CheckInput {
  groups: readonly Group[]
  meter: MeterColumns
  /** [G, 3] row-major: A, C, S in record units. */
  integrals: Float64Array
  sums: readonly Uint32Array[]
  width: number
  height: number
  /** Solution over the accepted groups; without it residual, conditioning and noise are left out. */
  solution?: FrameSetSolution
  /** Total distortion of each group's lamp, 0…1, where it was measured. */
  distortions?: readonly (number | null)[]
  /** Whole-period error of each group as the cut chose it. */
  wholePeriodErrors?: readonly (number | null)[]
}

/**
 * Check every repetition of a line, and the line as a whole, against `shared/checks.ts`.
 *
 * @returns results in order of repetitions, those of the line last
 */
export function checkLine(input: CheckInput): CheckResult[] {
  const { groups, sums, width, height, solution } = input
  const motion = repetitionMotion(groups, sums, width, height)
  const residuals = solution ? repetitionResiduals(groups, solution) : null
  const results = [...motion.keys()].sort((a, b) => a - b).flatMap((repetition) => {
    const lit = groups.flatMap((group, g) => group.repetition === repetition && group.role !== 'dark' && group.frameCount > 0 ? [g] : [])
    const { distance, matched } = motion.get(repetition)!
    return [
      ...lightChecks(input, repetition, lit),
      ...phaseChecks(input, repetition, lit),
      !matched
        ? unmeasured('camera-motion', repetition, 'The pictures of this repetition cannot be matched with the others: the camera moved far, or the scene has no texture. Reject the repetition.', false)
        : distance === null ? unmeasured('camera-motion', repetition, 'There is no other repetition to compare the pictures with.') : judge('camera-motion', repetition, distance),
      ...residuals ? [residuals.get(repetition) ?? unmeasured('residual', repetition, 'At least three accepted repetitions are needed to compare residuals.')] : [],
    ]
  })
  return solution ? [...results, ...lineChecks(input, solution)] : results
}

function lineChecks({ groups, sums }: CheckInput, { conditionNumber, noise, degreesOfFreedom }: FrameSetSolution): CheckResult[] {
  const reference = groups.findIndex(group => group.role !== 'dark' && group.frameCount > 0)
  const level = medianOf(sums[reference])
  return [
    judge('conditioning', null, conditionNumber),
    degreesOfFreedom > 0 && level > 0 ? judge('noise', null, 100 * medianOf(noise) / level) : unmeasured('noise', null, 'One repetition does not show the noise. Shoot at least two.'),
  ]
}

/** Residual of each repetition over the median of all, when there are at least three. */
function repetitionResiduals(groups: readonly Group[], { residualRms, degreesOfFreedom }: FrameSetSolution): Map<number, CheckResult> {
  const squares = new Map<number, number[]>()
  groups.forEach(({ repetition, role }, g) => {
    if (role !== 'dark' && Number.isFinite(residualRms[g])) squares.set(repetition, [...squares.get(repetition) ?? [], residualRms[g] ** 2])
  })
  const rms = new Map([...squares].map(([repetition, values]) => [repetition, Math.sqrt(values.reduce((sum, value) => sum + value, 0) / values.length)]))
  const middle = medianOf([...rms.values()])
  if (rms.size < 3 || degreesOfFreedom < 1 || !(middle > 0)) return new Map()
  return new Map([...rms].map(([repetition, value]) => [repetition, judge('residual', repetition, value / middle)]))
}

/** Median of up to about 65 000 evenly spaced values. */
function medianOf(values: ArrayLike<number>): number {
  const every = Math.max(1, Math.ceil(values.length / 65_536))
  const some = Float64Array.from({ length: Math.ceil(values.length / every) }, (_, i) => values[i * every]).sort()
  return some.length % 2 ? some[some.length >> 1] : (some[(some.length >> 1) - 1] + some[some.length >> 1]) / 2
}
