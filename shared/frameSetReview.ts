import type { Flag } from './measurement'
import type { Rejection, SolveHistory } from './schemas/results'

export interface KnownShift { a: string, b: string, dx: number, dy: number, converged: boolean, iterations: number, correlation: number }

/** Kept with a frame set so that a later run of the check stage knows what it may keep, and a person's decisions survive it. */
export interface FrameSetReview {
  /** Hash of all that went into the set besides the choice of repetitions. */
  identity: string
  /** Repetition → hash of its sums. A decision holds as long as it stays. */
  repetitionKeys: Record<string, string>
  /** Of each group: whether the cut list lets it in when its repetition is accepted. */
  usable: boolean[]
  rejections: Rejection[]
  /** Repetitions that a person wants in, whatever the checks say. */
  acceptedByPerson: number[]
  history: SolveHistory[]
  /** Shifts between sums, each named by its SHA-256, so that an unchanged pair is not registered again. */
  shifts?: KnownShift[]
  flags: Flag[]
}
