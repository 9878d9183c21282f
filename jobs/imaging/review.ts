import type { CheckResult } from '../../shared/checks'
import type { Flag, Group } from '../../shared/measurement'
import { inOrder, residualChecks } from './checks'
import { proposeRejections, type ProposedRejection } from './rejections'
import { planSolution, SolveError } from './solve'

export interface ReviewInput {
  /** As the cut list has them. */
  groups: readonly Group[]
  integrals: Float64Array
  /** See `repetitionChecks`. */
  fixedChecks: readonly CheckResult[]
  /** See `gramOfSums`. */
  gram: Float64Array
  /** Repetitions that a person has rejected, and those that a person wants in: the program does not touch either. */
  rejectedByPerson?: readonly number[]
  acceptedByPerson?: readonly number[]
}

export interface Review {
  groups: Group[]
  checks: CheckResult[]
  /** By the program; those of persons are not among them. */
  rejected: ProposedRejection[]
  flags: Flag[]
}

/**
 * Decide which repetitions of a line are used. What fails a rejecting check is left out while two good ones remain; then
 * the residuals of the rest are looked at again, because a bad repetition hides a less bad one. Dark groups stay in: the camera's
 * place does not matter to them.
 */
export function reviewRepetitions({ groups, integrals, fixedChecks, gram, rejectedByPerson = [], acceptedByPerson = [] }: ReviewInput): Review {
  const decided = new Set(acceptedByPerson)
  const rejected: ProposedRejection[] = []
  const flags: Flag[] = []
  for (;;) {
    const out = [...rejectedByPerson, ...rejected.map(({ repetition }) => repetition)]
    const present = withRejections(groups, out)
    const checks = inOrder([...fixedChecks], residualChecks(present, integrals, gram))
    const open = new Set(present.filter(group => group.accepted && group.role !== 'dark').map(group => group.repetition))
    const proposal = proposeRejections(checks.filter(({ repetition }) => repetition !== null && open.has(repetition)), decided)
    const more = proposal.rejected.map(({ repetition }) => repetition)
    const unsolvable = more.length ? whyUnsolvable(withRejections(groups, [...out, ...more]), integrals) : null
    if (!more.length || unsolvable) {
      if (unsolvable) flags.push({ code: 'too-few-good-repetitions', severity: 'problem', message: `Repetition ${more.join(', ')} should be rejected, but the rest cannot be solved. ${unsolvable}` })
      return { groups: present, checks, rejected, flags: [...flags, ...more.length ? [] : proposal.flags] }
    }
    rejected.push(...proposal.rejected)
    flags.push(...proposal.flags)
  }
}

/** Copies of the groups with the lit ones of these repetitions left out; a repetition that is wholly left out in the cut list counts as rejected there and comes back in when it is not named. */
export function withRejections(groups: readonly Group[], rejected: readonly number[]): Group[] {
  return groups.map(group => ({ ...group, accepted: group.accepted && (group.role === 'dark' || !rejected.includes(group.repetition)) }))
}

/** Null when these groups can be solved, else the sentence that says what is missing. */
export function whyUnsolvable(groups: readonly Group[], integrals: Float64Array): string | null {
  try {
    planSolution({ roles: groups.map(group => group.role), integrals, frames: groups.map(group => group.frameCount), accepted: groups.map(group => group.accepted) })
    return null
  } catch (error) {
    if (error instanceof SolveError) return error.message
    throw error
  }
}
