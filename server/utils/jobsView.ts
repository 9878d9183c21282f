import { and, count, desc, eq, getTableColumns, gt, inArray, isNotNull, sql } from 'drizzle-orm'
import type { z } from 'zod'
import { LampsumError } from '#shared/errors'
import type { Job, jobDetailSchema, QueueStatus, Runner } from '#shared/schemas/results'
import type { JobState } from '#shared/states'
import type { Database } from '../db/client'
import { publishEvents } from '../db/events'
import { withRetry } from '../db/retry'
import { acquisitions, campaigns, jobs, runners, settings } from '../db/schema'
import { queuePausedSetting } from '../../jobs/queue/mariadbQueue'
import { writeAudit } from './audit'
import { afterPosition, decodeCursor, pageOf, type ListPage, type ListQuery } from './lists'

const { log: _log, ...jobColumns } = getTableColumns(jobs)
type JobRow = Omit<typeof jobs.$inferSelect, 'log'>

const selectJobs = (database: Database) => database
  .select({ job: jobColumns, acquisitionNumber: acquisitions.number, acquisitionTitle: acquisitions.title, campaignId: campaigns.id, campaignName: campaigns.name, runnerName: runners.name }).from(jobs)
  .innerJoin(acquisitions, eq(acquisitions.id, jobs.acquisitionId)).innerJoin(campaigns, eq(campaigns.id, acquisitions.campaignId)).leftJoin(runners, eq(runners.id, jobs.runnerId))

function toJob({ job, ...names }: { job: JobRow, acquisitionNumber: number, acquisitionTitle: string, campaignId: string, campaignName: string, runnerName: string | null }): Job {
  const { id, stage, acquisitionId, state, progress, framesPerSecond, etaSeconds, attempts, priority, runnerId, message, errorCode, createdAt, startedAt, finishedAt } = job
  return {
    id, stage, acquisitionId, ...names, state, progress, framesPerSecond, etaSeconds, attempts, priority, runnerId, message, errorCode,
    createdAt: createdAt.toISOString(), startedAt: startedAt?.toISOString() ?? null, finishedAt: finishedAt?.toISOString() ?? null,
  }
}

/** Jobs, newest first. */
export async function listJobs(database: Database, { limit, cursor, acquisitionId, state }: ListQuery & { acquisitionId?: string, state?: JobState }): Promise<ListPage<Job>> {
  const rows = await selectJobs(database).where(and(
    acquisitionId ? eq(jobs.acquisitionId, acquisitionId) : undefined,
    state ? eq(jobs.state, state) : undefined,
    afterPosition(jobs.createdAt, jobs.id, decodeCursor(cursor)),
  )).orderBy(desc(jobs.createdAt), desc(jobs.id)).limit(limit + 1)
  const page = pageOf(rows.map(row => ({ ...row, createdAt: row.job.createdAt, id: row.job.id })), limit)
  return { items: page.rows.map(({ createdAt, id, ...row }) => toJob(row)), nextCursor: page.nextCursor }
}

export async function getJob(database: Database, id: string): Promise<z.output<typeof jobDetailSchema>> {
  const [row] = await selectJobs(database).where(eq(jobs.id, id))
  const [text] = await database.select({ log: jobs.log }).from(jobs).where(eq(jobs.id, id))
  if (!row) throw new LampsumError('not-found')
  return { ...toJob(row), log: text?.log ?? '' }
}

export async function readQueue(database: Database, diskFreeBytes: number): Promise<QueueStatus> {
  const [paused] = await database.select().from(settings).where(eq(settings.name, queuePausedSetting))
  const counts = await database.select({ state: jobs.state, jobs: count() }).from(jobs).groupBy(jobs.state)
  const [speed] = await database.select({ framesPerSecond: sql<number>`COALESCE(SUM(${jobs.framesPerSecond}), 0)`.mapWith(Number) }).from(jobs).where(eq(jobs.state, 'running'))
  return { paused: paused?.value === true, counts: Object.fromEntries(counts.map(row => [row.state, row.jobs])), framesPerSecond: speed?.framesPerSecond ?? 0, diskFreeBytes }
}

/** A paused queue starts no more jobs; those that run go on. */
export async function setQueuePaused(database: Database, userId: string, paused: boolean): Promise<void> {
  await withRetry(() => database.transaction(async (transaction) => {
    await transaction.insert(settings).values({ name: queuePausedSetting, value: paused }).onDuplicateKeyUpdate({ set: { value: paused } })
    await writeAudit(transaction, { userId, action: paused ? 'queue paused' : 'queue resumed' })
    await publishEvents(transaction, [{ type: 'runner', campaignId: null, payload: { paused } }])
  }))
}

const aliveMs = 15_000
/** Runners that are gone leave the list after a day. */
const shownMs = 24 * 3600_000
const historyLength = 60

/** Runners of the last day, the newest first, each with what it did lately, oldest first. */
export async function listRunners(database: Database, { limit, cursor }: ListQuery, now = new Date()): Promise<ListPage<Runner>> {
  const rows = await database.select().from(runners)
    .where(and(gt(runners.beatAt, new Date(now.getTime() - shownMs)), afterPosition(runners.startedAt, runners.id, decodeCursor(cursor))))
    .orderBy(desc(runners.startedAt), desc(runners.id)).limit(limit + 1)
  const page = pageOf(rows.map(row => ({ ...row, createdAt: row.startedAt })), limit)
  const histories = await readHistories(database, page.rows.map(row => row.id), new Date(now.getTime() - shownMs))
  return {
    items: page.rows.map(({ id, name, host, cores, slots, startedAt, beatAt, stoppedAt }) => ({
      id, name, host, cores, slots, alive: stoppedAt === null && now.getTime() - beatAt.getTime() < aliveMs,
      startedAt: startedAt.toISOString(), beatAt: beatAt.toISOString(), history: histories.get(id) ?? [],
    })),
    nextCursor: page.nextCursor,
  }
}

async function readHistories(database: Database, runnerIds: string[], since: Date): Promise<Map<string, Runner['history']>> {
  const histories = new Map<string, Runner['history']>()
  if (!runnerIds.length) return histories
  const rows = await database.select({ runnerId: jobs.runnerId, jobId: jobs.id, stage: jobs.stage, state: jobs.state, startedAt: jobs.startedAt, finishedAt: jobs.finishedAt }).from(jobs)
    .where(and(inArray(jobs.runnerId, runnerIds), isNotNull(jobs.startedAt), gt(jobs.createdAt, since))).orderBy(desc(jobs.createdAt), desc(jobs.id)).limit(historyLength * runnerIds.length)
  for (const { runnerId, startedAt, finishedAt, ...job } of rows) {
    const history = histories.get(runnerId!) ?? []
    if (history.length < historyLength) history.push({ ...job, startedAt: startedAt!.toISOString(), finishedAt: finishedAt?.toISOString() ?? null })
    histories.set(runnerId!, history)
  }
  for (const history of histories.values()) history.sort((a, b) => a.startedAt.localeCompare(b.startedAt))
  return histories
}
