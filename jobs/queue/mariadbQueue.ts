import { randomUUID } from 'node:crypto'
import { and, asc, eq, inArray, lt, lte, sql } from 'drizzle-orm'
import type { Database, Transaction } from '../../server/db/client'
import { isDuplicateKey, withRetry } from '../../server/db/retry'
import { jobs, settings } from '../../server/db/schema'
import { LampsumError } from '../../shared/errors'
import { jobActions, type JobAction } from '../../shared/states'
import { publishJobEvents } from './jobEvents'
import { crashesUntilParked, leaseSeconds, type Claim, type HeartbeatAnswer, type NewJob, type Outcome, type Progress, type Queue } from './queue'

const defaultPriority = 100
const seconds = (now: Date, count: number) => new Date(now.getTime() + count * 1000)
const matched = (result: unknown) => (result as [{ affectedRows: number }])[0].affectedRows

export const queuePausedSetting = 'queue.paused'

/** While a job is active its key keeps a second one of the same work out (a unique index). */
export const activeKeyOf = (job: Pick<NewJob, 'acquisitionId' | 'stage' | 'uploadId'>) => job.uploadId ? `${job.uploadId}:${job.stage}` : `${job.acquisitionId}:${job.stage}`

/** The queue on MariaDB. `clock` is injected so that tests can let leases run out. */
export function createQueue(database: Database, clock: () => Date = () => new Date()): Queue {
  const inTransaction = <T>(work: (transaction: Transaction) => Promise<T>) => withRetry(() => database.transaction(work))

  /** The fence: this attempt, by this runner, still running. */
  const mine = (claim: Claim) => and(eq(jobs.id, claim.jobId), eq(jobs.attempts, claim.attempt), eq(jobs.state, 'running'))

  return {
    publish: (job, within) => within ? publishJob(within, job, clock()) : inTransaction(transaction => publishJob(transaction, job, clock())),

    claim: runnerId => inTransaction(async (transaction) => {
      const now = clock()
      const [paused] = await transaction.select().from(settings).where(eq(settings.name, queuePausedSetting))
      if (paused?.value === true) return null
      const [next] = await transaction.select().from(jobs)
        .where(and(eq(jobs.state, 'waiting'), lte(jobs.notBefore, now)))
        .orderBy(asc(jobs.priority), asc(jobs.queuedAt), asc(jobs.id))
        .limit(1)
        .for('update', { skipLocked: true })
      if (!next) return null
      const attempt = next.attempts + 1
      await transaction.update(jobs).set({
        state: 'running', attempts: attempt, runnerId, leaseUntil: seconds(now, leaseSeconds), cancelRequested: null,
        progress: 0, framesPerSecond: null, etaSeconds: null, message: null, errorCode: null, startedAt: now, finishedAt: null,
      }).where(eq(jobs.id, next.id))
      await publishJobEvents(transaction, [next.id])
      return { jobId: next.id, stage: next.stage, acquisitionId: next.acquisitionId, uploadId: next.uploadId, inputsKey: next.inputsKey, attempt } satisfies Claim
    }),

    heartbeat: (claim, progress) => inTransaction(async (transaction): Promise<HeartbeatAnswer> => {
      const changed = await transaction.update(jobs).set({ leaseUntil: seconds(clock(), leaseSeconds), ...progressColumns(progress) }).where(mine(claim))
      if (!matched(changed)) return 'lost'
      const [row] = await transaction.select({ asked: jobs.cancelRequested }).from(jobs).where(eq(jobs.id, claim.jobId))
      await publishJobEvents(transaction, [claim.jobId])
      return row?.asked ?? 'go on'
    }),

    settle: (claim, outcome, results) => inTransaction(async (transaction) => {
      const changed = await transaction.update(jobs).set(outcomeColumns(outcome, clock())).where(mine(claim))
      if (!matched(changed)) return false
      await results?.(transaction)
      await publishJobEvents(transaction, [claim.jobId])
      return true
    }),

    act: (jobId, action) => inTransaction(transaction => actOnJob(transaction, jobId, action, clock())),

    setPriority: (jobId, priority) => inTransaction(async (transaction) => {
      const changed = await transaction.update(jobs).set({ priority }).where(eq(jobs.id, jobId))
      if (!matched(changed)) throw new LampsumError('not-found')
      await publishJobEvents(transaction, [jobId])
    }),

    reclaim: () => inTransaction(transaction => reclaimJobs(transaction, clock())),
  }
}

/** Adds a job inside a caller's transaction; null when the same work is active already. */
export async function publishJob(transaction: Transaction, job: NewJob, now = new Date()): Promise<string | null> {
  const id = randomUUID()
  try {
    await transaction.insert(jobs).values({
      id, stage: job.stage, acquisitionId: job.acquisitionId, uploadId: job.uploadId ?? null, state: 'waiting', activeKey: activeKeyOf(job), inputsKey: job.inputsKey ?? null,
      priority: job.priority ?? defaultPriority, queuedAt: now, notBefore: now, attempts: 0, crashes: 0, progress: 0, createdAt: now,
    })
  } catch (error) {
    if (isDuplicateKey(error)) return null
    throw error
  }
  await publishJobEvents(transaction, [id])
  return id
}

const progressColumns = (progress: Progress) => ({
  progress: progress.progress,
  framesPerSecond: progress.framesPerSecond ?? null,
  etaSeconds: progress.etaSeconds ?? null,
  ...(progress.message === undefined ? {} : { message: progress.message }),
})

function outcomeColumns(outcome: Outcome, now: Date) {
  const stillActive = outcome.state === 'waiting' || outcome.state === 'on hold'
  return {
    state: outcome.state, message: outcome.message, errorCode: outcome.errorCode ?? null, ...(outcome.log === undefined ? {} : { log: outcome.log }),
    ...(outcome.state === 'done' ? { progress: 1 } : {}), ...(outcome.state === 'waiting' ? { queuedAt: now } : {}),
    ...(stillActive ? {} : { activeKey: null, finishedAt: now }), leaseUntil: null, cancelRequested: null, etaSeconds: null,
  }
}

/** A person's action, as compare-and-set statements: whoever comes second is told that the job has moved on. */
async function actOnJob(transaction: Transaction, jobId: string, action: JobAction, now: Date): Promise<void> {
  const [job] = await transaction.select().from(jobs).where(eq(jobs.id, jobId)).for('update')
  if (!job) throw new LampsumError('not-found')
  if (!(jobActions[action] as readonly string[]).includes(job.state)) throw new LampsumError('wrong-state', `This job is ${job.state}, so it cannot take “${action}”. Reload to see its present state.`)
  const active = activeKeyOf({ ...job, uploadId: job.uploadId ?? undefined })
  const waiting = { state: 'waiting', activeKey: active, queuedAt: now, notBefore: now, cancelRequested: null, message: null, errorCode: null, crashes: 0, finishedAt: null, progress: 0 } as const
  const changes = {
    cancel: job.state === 'running' ? { cancelRequested: 'cancel' as const } : { state: 'cancelled' as const, activeKey: null, finishedAt: now, message: 'Cancelled. Retry runs it again.' },
    hold: job.state === 'running' ? { cancelRequested: 'hold' as const } : { state: 'on hold' as const, message: 'Put on hold. Resume lets it go on.' },
    resume: waiting,
    retry: waiting,
  }[action]
  try {
    await transaction.update(jobs).set(changes).where(eq(jobs.id, jobId))
  } catch (error) {
    if (isDuplicateKey(error)) throw new LampsumError('wrong-state', 'The same stage is queued again already. Watch that job instead.', { cause: error })
    throw error
  }
  await publishJobEvents(transaction, [jobId])
}

/** Jobs whose runner has not beaten in time go back into the queue; one that took its runner down three times is parked. */
async function reclaimJobs(transaction: Transaction, now: Date): Promise<number> {
  const lost = await transaction.select().from(jobs).where(and(eq(jobs.state, 'running'), lt(jobs.leaseUntil, now))).limit(100).for('update', { skipLocked: true })
  for (const job of lost) {
    const crashes = job.crashes + 1
    const end = job.cancelRequested === 'cancel'
      ? { state: 'cancelled' as const, activeKey: null, finishedAt: now, message: 'Cancelled. Retry runs it again.' }
      : crashes >= crashesUntilParked
        ? { state: 'failed' as const, activeKey: null, finishedAt: now, errorCode: 'runner-crashed', message: `The runner stopped ${crashes} times in the middle of this. Look at its log, then retry.` }
        : { state: 'waiting' as const, message: 'Its runner stopped in the middle. It starts again by itself.' }
    await transaction.update(jobs).set({ ...end, crashes, leaseUntil: null, cancelRequested: null }).where(and(eq(jobs.id, job.id), eq(jobs.attempts, job.attempts)))
  }
  await publishJobEvents(transaction, lost.map(job => job.id))
  return lost.length
}

/** Jobs that wait for disk space go on when there is some again. */
export async function resumeDiskHolds(database: Database, now = new Date()): Promise<number> {
  return withRetry(() => database.transaction(async (transaction) => {
    const held = await transaction.select({ id: jobs.id }).from(jobs).where(and(eq(jobs.state, 'on hold'), eq(jobs.errorCode, 'disk-full'))).limit(100).for('update', { skipLocked: true })
    if (!held.length) return 0
    const ids = held.map(job => job.id)
    await transaction.update(jobs).set({ state: 'waiting', errorCode: null, message: null, queuedAt: now, notBefore: now, crashes: sql`0` }).where(inArray(jobs.id, ids))
    await publishJobEvents(transaction, ids)
    return ids.length
  }))
}
