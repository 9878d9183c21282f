import { createQueue } from '../../jobs/queue/mariadbQueue'
import type { JobAction } from '#shared/states'
import type { Database } from '../db/client'
import { writeAudit } from './audit'

const done: Record<JobAction, string> = { cancel: 'job cancelled', retry: 'job retried', hold: 'job put on hold', resume: 'job resumed' }

export async function controlJob(database: Database, userId: string, jobId: string, action: JobAction): Promise<void> {
  await createQueue(database).act(jobId, action)
  await writeAudit(database, { userId, action: done[action], subject: jobId })
}

export async function prioritiseJob(database: Database, userId: string, jobId: string, priority: number): Promise<void> {
  await createQueue(database).setPriority(jobId, priority)
  await writeAudit(database, { userId, action: 'job priority changed', subject: jobId, details: { priority } })
}
