import { eq, inArray } from 'drizzle-orm'
import type { Transaction } from '../../server/db/client'
import { publishEvents, type NewEvent } from '../../server/db/events'
import { acquisitions, campaigns, jobs, runners } from '../../server/db/schema'

/** Announces the present state of jobs, and of their acquisitions, as the last thing of a transaction. */
export async function publishJobEvents(transaction: Transaction, jobIds: string[]): Promise<void> {
  if (!jobIds.length) return
  const rows = await transaction
    .select({ job: jobs, number: acquisitions.number, title: acquisitions.title, campaignId: campaigns.id, campaignName: campaigns.name, runnerName: runners.name })
    .from(jobs)
    .innerJoin(acquisitions, eq(acquisitions.id, jobs.acquisitionId))
    .innerJoin(campaigns, eq(campaigns.id, acquisitions.campaignId))
    .leftJoin(runners, eq(runners.id, jobs.runnerId))
    .where(inArray(jobs.id, jobIds))
  const events = rows.map(({ job, number, title, campaignId, campaignName, runnerName }): NewEvent => ({
    type: 'job',
    campaignId,
    payload: {
      id: job.id, stage: job.stage, acquisitionId: job.acquisitionId, acquisitionNumber: number, acquisitionTitle: title, campaignId, campaignName,
      state: job.state, progress: job.progress, framesPerSecond: job.framesPerSecond, etaSeconds: job.etaSeconds, attempts: job.attempts, priority: job.priority,
      runnerId: job.runnerId, runnerName, message: job.message, errorCode: job.errorCode,
      createdAt: job.createdAt.toISOString(), startedAt: job.startedAt?.toISOString() ?? null, finishedAt: job.finishedAt?.toISOString() ?? null,
    },
  }))
  const settled = rows.filter(({ job }) => job.state !== 'running' || job.progress === 0)
  const touched = new Map(settled.map(({ job, campaignId }) => [job.acquisitionId, campaignId]))
  for (const [id, campaignId] of touched) events.push({ type: 'acquisition', campaignId, payload: { id, campaignId } })
  await publishEvents(transaction, events)
}
