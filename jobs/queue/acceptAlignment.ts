import { and, desc, eq } from 'drizzle-orm'
import type { Database } from '../../server/db/client'
import { withRetry } from '../../server/db/retry'
import { acquisitions, alignments, jobs } from '../../server/db/schema'
import { advanceWithin } from './advance'

/**
 * Stores a person's alignment as a new version. The align stage runs once more to judge it (residual, predicted
 * light) and everything behind it follows. Answers the version.
 */
export function acceptAlignment(database: Database, acquisitionId: string, values: { offsetSeconds: number, driftPpm: number }, userId: string): Promise<number> {
  return withRetry(() => database.transaction(async (transaction) => {
    const now = new Date()
    await transaction.select({ id: acquisitions.id }).from(acquisitions).where(eq(acquisitions.id, acquisitionId)).for('update')
    const [newest] = await transaction.select().from(alignments).where(eq(alignments.acquisitionId, acquisitionId)).orderBy(desc(alignments.version)).limit(1)
    const version = (newest?.version ?? 0) + 1
    await transaction.insert(alignments).values({ acquisitionId, version, ...values, residual: null, confidence: null, method: 'manual', evidence: null, accepted: true, authorId: userId, createdAt: now })
    await transaction.update(jobs).set({ state: 'done', message: `Settled by hand as version ${version}.` }).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.stage, 'align'), eq(jobs.state, 'needs review')))
    await transaction.update(acquisitions).set({ runRequestedAt: now }).where(eq(acquisitions.id, acquisitionId))
    await advanceWithin(transaction, acquisitionId)
    return version
  }))
}
