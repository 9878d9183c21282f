import { checkDefinitions, type CheckDefinition, type CheckResult } from '../../shared/checks'
import type { Flag } from '../../shared/measurement'

const leastGood = 2

export interface ProposedRejection {
  repetition: number
  /** A sentence for every check it failed. */
  reason: string
}

/** Whether failing this check makes a repetition a candidate for rejection. */
export const rejects = ({ checkId, passed }: CheckResult) => !passed && (checkDefinitions as Record<string, CheckDefinition>)[checkId]?.rejects === true

/**
 * Which repetitions an automatic run leaves out: those that fail a check that rejects, when at least two good ones remain.
 *
 * @param checks of one line's accepted repetitions
 * @param decided repetitions that a person has accepted: never proposed, and good whatever their checks say
 * @returns the repetitions to reject, ascending, and a flag for each; when too few good ones would remain nothing is
 * rejected and one flag asks for a person
 */
export function proposeRejections(checks: readonly CheckResult[], decided: ReadonlySet<number> = new Set()): { proposed: number[], rejected: ProposedRejection[], flags: Flag[] } {
  const repetitions = [...new Set(checks.flatMap(({ repetition }) => repetition ?? []))].sort((a, b) => a - b)
  const failures = repetitions.filter(repetition => !decided.has(repetition)).map(repetition => ({ repetition, failed: checks.filter(check => check.repetition === repetition && rejects(check)) })).filter(({ failed }) => failed.length)
  const proposed = failures.map(({ repetition }) => repetition)
  if (!proposed.length) return { proposed, rejected: [], flags: [] }
  const good = repetitions.length - proposed.length
  if (good < leastGood) return { proposed, rejected: [], flags: [tooFew(proposed, good, failures[0].failed[0].message)] }
  const rejected = failures.map(({ repetition, failed }) => ({ repetition, reason: failed.map(({ message }) => message).join(' ') }))
  return { proposed, rejected, flags: rejected.map(rejectionFlag) }
}

export const rejectionFlag = ({ repetition, reason }: ProposedRejection): Flag => ({ code: 'repetition-rejected', severity: 'warning', message: `Repetition ${repetition} was rejected. ${reason}` })

function tooFew(proposed: number[], good: number, message: string): Flag {
  const [those, ones] = [proposed.length === 1 ? `Repetition ${proposed[0]}` : `Repetitions ${proposed.join(', ')}`, good === 1 ? 'one' : 'ones']
  return { code: 'too-few-good-repetitions', severity: 'problem', message: `${those} should be rejected, but only ${good} good ${ones} would remain. Look at the checks of the frame set and decide there, or shoot more repetitions. ${message}` }
}
