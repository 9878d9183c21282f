import { and, desc, eq, gt, inArray, ne, or, sql } from 'drizzle-orm'
import type { Upload } from '#shared/schemas/campaigns'
import type { User } from '#shared/schemas/people'
import type { Database, Transaction } from '../db/client'
import { publishEvents } from '../db/events'
import { acquisitions, uploads, users } from '../db/schema'
import { afterPosition, decodeCursor, pageOf, type ListPage, type ListQuery } from './lists'

export type UploadRow = typeof uploads.$inferSelect
interface UploadJoined { upload: UploadRow, acquisitionTitle: string, campaignId: string, userName: string }

/** Refused uploads are shown for this long. */
const refusedShownMs = 7 * 24 * 3600_000

const selectUploads = (database: Database | Transaction) => database
  .select({ upload: uploads, acquisitionTitle: acquisitions.title, campaignId: acquisitions.campaignId, userName: users.name }).from(uploads)
  .innerJoin(acquisitions, eq(acquisitions.id, uploads.acquisitionId)).innerJoin(users, eq(users.id, uploads.userId))

function toUpload({ upload, acquisitionTitle, userName }: UploadJoined): Upload {
  const { id, acquisitionId, kind, part, filename, bytes, receivedBytes, state, sha256, message, createdAt, lastActivityAt, userId } = upload
  return { id, acquisitionId, acquisitionTitle, kind, part, filename, bytes, receivedBytes, state, sha256, message, createdAt: createdAt.toISOString(), lastActivityAt: lastActivityAt.toISOString(), userId, userName }
}

/** Whose uploads a person may go on with or remove: a technician their own, the others everybody's. */
export const mayHandleUpload = (user: User, ownerId: string) => user.role !== 'technician' || user.id === ownerId

/** Uploads that are not stored yet, newest first; a technician sees their own. */
export async function listUploads(database: Database, user: User, { limit, cursor, acquisitionId }: ListQuery & { acquisitionId?: string }, now = new Date()): Promise<ListPage<Upload>> {
  const rows = await selectUploads(database).where(and(
    or(inArray(uploads.state, ['receiving', 'verifying']), and(eq(uploads.state, 'refused'), gt(uploads.lastActivityAt, new Date(now.getTime() - refusedShownMs)))),
    user.role === 'technician' ? eq(uploads.userId, user.id) : undefined,
    acquisitionId ? eq(uploads.acquisitionId, acquisitionId) : undefined,
    afterPosition(uploads.createdAt, uploads.id, decodeCursor(cursor)),
  )).orderBy(desc(uploads.createdAt), desc(uploads.id)).limit(limit + 1)
  const page = pageOf(rows.map(row => ({ ...row, createdAt: row.upload.createdAt, id: row.upload.id })), limit)
  return { items: page.rows.map(toUpload), nextCursor: page.nextCursor }
}

/** All uploads of an acquisition but the removed ones, newest first. */
export async function listUploadsOf(database: Database, acquisitionId: string): Promise<Upload[]> {
  const rows = await selectUploads(database).where(and(eq(uploads.acquisitionId, acquisitionId), ne(uploads.state, 'removed'))).orderBy(desc(uploads.createdAt), desc(uploads.id))
  return rows.map(toUpload)
}

export async function findUpload(database: Database, id: string): Promise<UploadRow | null> {
  return (await database.select().from(uploads).where(eq(uploads.id, id)))[0] ?? null
}

/** Bytes that are still to come in for uploads under way: promised space. */
export async function openReservationBytes(database: Database): Promise<number> {
  const [row] = await database.select({ bytes: sql<number>`COALESCE(SUM(${uploads.bytes} - ${uploads.receivedBytes}), 0)`.mapWith(Number) }).from(uploads).where(eq(uploads.state, 'receiving'))
  return row?.bytes ?? 0
}

/** Announces an upload's present state, as the last thing of a transaction; `settled` also when its acquisition has a new state. */
export async function publishUploadEvent(transaction: Transaction, id: string, { settled }: { settled: boolean }): Promise<void> {
  const [row] = await selectUploads(transaction).where(eq(uploads.id, id))
  if (!row) return
  const { campaignId, upload } = row
  await publishEvents(transaction, [
    { type: 'upload', campaignId, payload: toUpload(row) },
    ...(settled ? [{ type: 'acquisition' as const, campaignId, payload: { id: upload.acquisitionId, campaignId } }] : []),
  ])
}
