/**
 * The queue, behind one narrow interface, because on many machines another queue will take its place.
 *
 * job      one stage on one acquisition, a row in `jobs`
 * claim    a runner's right to one attempt of a job, until its lease runs out
 * attempt  the number of that claim; every write of the attempt carries it as a fence, so an attempt that was
 *          given up (its lease ran out while it was stopped) changes nothing any more
 * settle   the end of an attempt: its results and its state in one transaction
 */
import type { Transaction } from '../../server/db/client'
import type { JobAction, JobState, Stage } from '../../shared/states'

export interface NewJob {
  stage: Stage
  acquisitionId: string
  uploadId?: string
  inputsKey?: string
  priority?: number
}

export interface Claim {
  jobId: string
  stage: Stage
  acquisitionId: string
  uploadId: string | null
  inputsKey: string | null
  attempt: number
}

export interface Progress {
  progress: number
  framesPerSecond?: number | null
  etaSeconds?: number | null
  message?: string | null
}

/** What the heartbeat answers: carry on, stop as a person asked, or stop because the claim is no longer ours. */
export type HeartbeatAnswer = 'go on' | 'cancel' | 'hold' | 'lost'

export interface Outcome {
  state: Extract<JobState, 'done' | 'needs review' | 'failed' | 'cancelled' | 'on hold' | 'waiting'>
  message: string
  errorCode?: string
  log?: string
}

export interface Queue {
  /** Adds a job unless the same stage of the acquisition is active already (then answers null). */
  publish: (job: NewJob, within?: Transaction) => Promise<string | null>
  claim: (runnerId: string) => Promise<Claim | null>
  heartbeat: (claim: Claim, progress: Progress) => Promise<HeartbeatAnswer>
  /** Writes the results and the state together; false (and nothing written) when the claim is no longer ours. */
  settle: (claim: Claim, outcome: Outcome, results?: (transaction: Transaction) => Promise<void>) => Promise<boolean>
  /** A person's action; throws LampsumError('wrong-state') when the job's state does not allow it. */
  act: (jobId: string, action: JobAction) => Promise<void>
  setPriority: (jobId: string, priority: number) => Promise<void>
  /** Gives jobs of dead runners back; parks those that crashed their runner three times. Answers how many. */
  reclaim: () => Promise<number>
}

/** A claim is lost when its runner has not beaten for this long. */
export const leaseSeconds = 20
export const heartbeatSeconds = 1
export const crashesUntilParked = 3
