import { checkDefinitions, type CheckDefinition, type CheckResult } from '../../shared/checks'
import type { FrameSetReview } from '../../shared/frameSetReview'
import type { Flag, Group } from '../../shared/measurement'

/**
 * Whether the cut list lets each group in once its repetition is accepted. A repetition of which it lets nothing in is rejected
 * as a whole, and could be taken back in; a single group that it leaves out stays out.
 */
export function usableGroups(groups: readonly Group[]): boolean[] {
  const outside = new Set(leftOutWhole(groups))
  return groups.map(group => group.accepted || (group.role !== 'dark' && outside.has(group.repetition)))
}

function leftOutWhole(groups: readonly Group[]): number[] {
  const lit = groups.filter(group => group.role !== 'dark')
  const open = new Set(lit.filter(group => group.accepted).map(group => group.repetition))
  return [...new Set(lit.map(group => group.repetition))].filter(repetition => !open.has(repetition))
}

/** People's decisions about repetitions whose sums are what they were, and the cut list's own rejections. */
export function decisionsThatHold(review: FrameSetReview | null, groups: readonly Group[], repetitionKeys: Record<string, string>): Pick<FrameSetReview, 'rejections' | 'acceptedByPerson' | 'history'> {
  const unchanged = (repetition: number) => review !== null && review.repetitionKeys[repetition] !== undefined && review.repetitionKeys[repetition] === repetitionKeys[repetition]
  const acceptedByPerson = (review?.acceptedByPerson ?? []).filter(unchanged)
  const byPeople = (review?.rejections ?? []).filter(({ byId, repetition }) => byId !== null && unchanged(repetition))
  const known = new Set([...acceptedByPerson, ...byPeople.map(({ repetition }) => repetition)])
  const byCutList = leftOutWhole(groups).filter(repetition => !known.has(repetition)).map(repetition => ({ repetition, by: 'cut list', byId: null, reason: 'Left out in the cut list.' }))
  return { rejections: [...byPeople, ...byCutList], acceptedByPerson, history: byPeople.length || acceptedByPerson.length ? review!.history : [] }
}

/** Failed checks of what is used, other than those that reject, told once a check. */
export function warningsOf(checks: readonly CheckResult[], groups: readonly Group[]): Flag[] {
  const used = new Set(groups.filter(group => group.accepted && group.role !== 'dark').map(group => group.repetition))
  const failed = checks.filter(({ checkId, passed, repetition }) => !passed && (repetition === null || used.has(repetition)) && !(checkDefinitions as Record<string, CheckDefinition>)[checkId]?.rejects)
  return [...new Map(failed.map(result => [result.checkId, result])).values()].map(({ checkId, message }) => ({ code: checkId, severity: 'warning', message }))
}

export const named = (flag: Flag, line: number, frequencyHz: number): Flag => ({ ...flag, message: `Line ${line} (${Number(frequencyHz.toFixed(2))} Hz): ${flag.message}` })
