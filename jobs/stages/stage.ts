/**
 * A stage is one file named after it. It has three parts:
 *   load     on the runner's main thread: from database rows to a plain payload (paths, numbers), or a StageError
 *   run      in a worker thread: reads the payload, writes files into its own work folder, answers plain data
 *   publish  on the main thread, inside the transaction that settles the job: rows beyond `stage_outputs`
 * A stage may run twice (its runner can die at any moment), so `run` depends on nothing but its payload.
 */
import type { Transaction } from '../../server/db/client'
import type { FileStore } from '../../server/store/fileStore'
import type { Flag } from '../../shared/measurement'
import type { Situation } from '../queue/inputs'
import type { Progress } from '../queue/queue'

export interface StageHelpers {
  signal: AbortSignal
  workDir: string
  progress: (progress: Progress) => void
  log: (line: string) => void
}

export interface StageResult {
  state: 'done' | 'needs review'
  /** What was found, or why a person should look, in a sentence. */
  message: string
  facts: Record<string, unknown>
  /** Name → path in the work folder; moved into the store before the job is settled. */
  files: Record<string, string>
  flags: Flag[]
}

export interface PublishContext<P, R> {
  situation: Situation
  payload: P
  result: R
  /** Name → key of the files, now in the store. */
  keys: Record<string, string>
  jobId: string
}

export interface StageDefinition<P = unknown, R extends StageResult = StageResult> {
  load: (situation: Situation, store: FileStore) => Promise<P> | P
  run: (payload: P, helpers: StageHelpers) => Promise<R>
  /** May change `result.facts` before they are stored, for example to add the version it made. */
  publish?: (transaction: Transaction, context: PublishContext<P, R>) => Promise<void>
}

export const defineStage = <P, R extends StageResult = StageResult>(stage: StageDefinition<P, R>) => stage

/** A stage cannot go on; `review` when a person can mend it on the acquisition's page without new files. */
export class StageError extends Error {
  override name = 'StageError'
  constructor(readonly code: string, message: string, readonly options: { review?: boolean, cause?: unknown } = {}) {
    super(message, { cause: options.cause })
  }
}
