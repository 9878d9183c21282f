import { and, eq, lt } from 'drizzle-orm'
import { publishJob } from '../../jobs/queue/mariadbQueue'
import type { Database } from '../db/client'
import { withRetry } from '../db/retry'
import { uploads } from '../db/schema'
import { publishUploadEvent, type UploadRow } from './uploads'

/** Opens the row of an upload before its first byte, so that its space counts as promised. */
export async function openUpload(database: Database, row: UploadRow): Promise<void> {
  await withRetry(() => database.transaction(async (transaction) => {
    await transaction.insert(uploads).values(row)
    await publishUploadEvent(transaction, row.id, { settled: true })
  }))
}

/** Notes how many bytes have arrived, as long as the upload is under way. */
export async function noteProgress(database: Database, id: string, receivedBytes: number, now = new Date()): Promise<void> {
  await withRetry(() => database.transaction(async (transaction) => {
    const [result] = await transaction.update(uploads).set({ receivedBytes, lastActivityAt: now }).where(and(eq(uploads.id, id), eq(uploads.state, 'receiving')))
    if (result.affectedRows) await publishUploadEvent(transaction, id, { settled: false })
  }))
}

/**
 * All bytes are here: the upload waits for its proof. One transaction, and only from `receiving`, so that it may be
 * called by whoever notices first, any number of times. Answers whether this call did it.
 */
export function finishUpload(database: Database, id: string, now = new Date()): Promise<boolean> {
  return withRetry(() => database.transaction(async (transaction) => {
    const [upload] = await transaction.select().from(uploads).where(and(eq(uploads.id, id), eq(uploads.state, 'receiving'))).for('update')
    if (!upload) return false
    await transaction.update(uploads).set({ state: 'verifying', receivedBytes: upload.bytes, lastActivityAt: now }).where(eq(uploads.id, id))
    await publishJob(transaction, { stage: 'verify', acquisitionId: upload.acquisitionId, uploadId: id, priority: proofPriority })
    await publishUploadEvent(transaction, id, { settled: true })
    return true
  }))
}

/** Proofs go first: people wait for them before they clear a card. */
const proofPriority = 10

/** Gives a partial upload up; answers false when it is complete, or gone already. With `idleSince` only when nothing arrived since. */
export function removeUpload(database: Database, id: string, message: string, idleSince?: Date): Promise<boolean> {
  return withRetry(() => database.transaction(async (transaction) => {
    const [result] = await transaction.update(uploads).set({ state: 'removed', message })
      .where(and(eq(uploads.id, id), eq(uploads.state, 'receiving'), idleSince ? lt(uploads.lastActivityAt, idleSince) : undefined))
    if (!result.affectedRows) return false
    await publishUploadEvent(transaction, id, { settled: true })
    return true
  }))
}
