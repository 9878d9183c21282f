import { checkDefinitions, type CheckDefinition, type CheckResult } from '../../shared/checks'
import type { Flag } from '../../shared/measurement'

const leastGood = 2

/**
 * Which repetitions an automatic run leaves out: those that fail a check that rejects, when at least two good ones remain.
 *
 * @param checks of one line, without those of repetitions that a person has rejected already
 * @returns the repetitions to reject, ascending, and a flag for each; when too few good ones would remain nothing is
 * rejected and one flag asks for a person
 */
export function proposeRejections(checks: readonly CheckResult[]): { proposed: number[], rejected: number[], flags: Flag[] } {
  const rejects = ({ checkId, passed }: CheckResult) => !passed && (checkDefinitions as Record<string, CheckDefinition>)[checkId]?.rejects === true
  const repetitions = [...new Set(checks.flatMap(({ repetition }) => repetition ?? []))].sort((a, b) => a - b)
  const failures = repetitions.map(repetition => ({ repetition, failed: checks.filter(check => check.repetition === repetition && rejects(check)) })).filter(({ failed }) => failed.length)
  const proposed = failures.map(({ repetition }) => repetition)
  const good = repetitions.length - proposed.length
  if (!proposed.length) return { proposed, rejected: [], flags: [] }
  if (good < leastGood) {
    return { proposed, rejected: [], flags: [{ code: 'too-few-good-repetitions', severity: 'problem', message: `Repetition ${proposed.join(', ')} should be rejected, but only ${good} good ${good === 1 ? 'one' : 'ones'} would remain. Look at the checks and decide, or shoot more repetitions. ${failures[0].failed[0].message}` }] }
  }
  return { proposed, rejected: proposed, flags: failures.map(({ repetition, failed }) => ({ code: 'repetition-rejected', severity: 'warning', message: `Repetition ${repetition} was rejected. ${failed.map(({ message }) => message).join(' ')}` })) }
}
