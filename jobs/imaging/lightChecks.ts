import type { CheckResult } from '../../shared/checks'
import type { Group } from '../../shared/measurement'
import { judge, unmeasured } from './checkResult'
import type { CheckInput } from './checks'

/** Per-frame columns of the meter stage: mean light in E, shares of clipped and black pixels 0…1. */
export interface MeterColumns {
  light: ArrayLike<number>
  clipped: ArrayLike<number>
  black: ArrayLike<number>
}

/** Clipped and black share, lamp level and light against record, of one repetition's lit groups (indices into the line's groups). */
export function lightChecks({ groups, meter, integrals }: CheckInput, repetition: number, lit: readonly number[]): CheckResult[] {
  const largest = (column: ArrayLike<number>) => Math.max(...lit.map(g => meanOver(column, groups[g])))
  const levels = lit.map(g => integrals[3 * g] / groups[g].frameCount)
  const dark = groups.filter(group => group.role === 'dark' && group.frameCount > 0)
  const ambient = dark.length ? dark.reduce((sum, group) => sum + meanOver(meter.light, group), 0) / dark.length : 0
  const gains = lit.map((g, i) => (meanOver(meter.light, groups[g]) - ambient) / levels[i])
  const measured = levels.every(level => Number.isFinite(level) && level > 0)
  return [
    judge('clipped-share', repetition, 100 * largest(meter.clipped)),
    judge('black-share', repetition, 100 * largest(meter.black)),
    measured ? judge('level-drift', repetition, 100 * spread(levels)) : unmeasured('level-drift', repetition, 'The record does not cover all frames of this repetition, or shows no light in them.', false),
    measured ? judge('light-drift', repetition, 100 * spread(gains)) : unmeasured('light-drift', repetition, 'There is no lamp level to compare the frames with.', false),
  ]
}

function meanOver(column: ArrayLike<number>, { firstFrame, frameCount }: Group): number {
  let sum = 0
  for (let frame = firstFrame; frame < firstFrame + frameCount; frame++) sum += column[frame]
  return sum / frameCount
}

/** Largest minus smallest over the mean. */
function spread(values: readonly number[]): number {
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length
  return (Math.max(...values) - Math.min(...values)) / Math.abs(mean)
}
