import { createHash } from 'node:crypto'
import { createReadStream } from 'node:fs'
import { rm, stat } from 'node:fs/promises'
import { join } from 'node:path'
import { eq } from 'drizzle-orm'
import type { Database, Transaction } from '../../server/db/client'
import { publishEvents } from '../../server/db/events'
import { acquisitions, uploads, users } from '../../server/db/schema'
import type { FileStore } from '../../server/store/fileStore'
import { advanceWithin } from '../queue/advance'
import { StageError, type StageHelpers, type StageResult } from './stage'

export interface VerifyPayload {
  uploadId: string
  path: string
  bytes: number
}

export const uploadKey = (uploadId: string) => `uploads/${uploadId}`

/** An upload's file lies in `incoming`, or, when an earlier attempt died just before its commit, in the store already. */
export async function loadVerify(database: Database, uploadId: string, incoming: string, store: FileStore): Promise<VerifyPayload> {
  const [upload] = await database.select().from(uploads).where(eq(uploads.id, uploadId))
  if (!upload) throw new StageError('upload-gone', 'This upload is gone. Upload the file again.')
  const stored = await store.stat(uploadKey(uploadId))
  return { uploadId, path: stored ? store.localPath(uploadKey(uploadId)) : join(incoming, uploadId), bytes: upload.bytes }
}

/** Reads the whole file once and proves that every byte is there. Answers { sha256 }. */
export async function runVerify({ path, bytes }: VerifyPayload, { signal, progress }: StageHelpers): Promise<StageResult> {
  const size = (await stat(path)).size
  if (size !== bytes) throw new StageError('size-differs', `The server holds ${size} of ${bytes} bytes. Upload the file again.`)
  const hash = createHash('sha256')
  let read = 0
  for await (const chunk of createReadStream(path, { signal, highWaterMark: 1 << 20 })) {
    hash.update(chunk as Buffer)
    read += (chunk as Buffer).length
    progress({ progress: read / bytes })
  }
  return { state: 'done', message: 'Every byte arrived.', facts: { sha256: hash.digest('hex') }, files: {}, flags: [] }
}

/** Moves the proven file into the store; may be repeated. */
export async function storeVerified(payload: VerifyPayload, incoming: string, store: FileStore): Promise<void> {
  if (!await store.stat(uploadKey(payload.uploadId))) await store.put(uploadKey(payload.uploadId), join(incoming, payload.uploadId))
  await rm(join(incoming, `${payload.uploadId}.json`), { force: true })
}

export async function publishVerified(transaction: Transaction, payload: VerifyPayload, sha256: string): Promise<void> {
  const now = new Date()
  await transaction.update(uploads).set({ state: 'stored', sha256, fileKey: uploadKey(payload.uploadId), receivedBytes: payload.bytes, storedAt: now, message: null }).where(eq(uploads.id, payload.uploadId))
  const acquisitionId = await announceUpload(transaction, payload.uploadId)
  await advanceWithin(transaction, acquisitionId)
}

/** The upload is refused for good when it cannot be proven. */
export async function publishRefused(transaction: Transaction, uploadId: string, message: string): Promise<void> {
  await transaction.update(uploads).set({ state: 'refused', message }).where(eq(uploads.id, uploadId))
  await announceUpload(transaction, uploadId)
}

/** Answers the upload's acquisition. */
async function announceUpload(transaction: Transaction, uploadId: string): Promise<string> {
  const [row] = await transaction.select({ upload: uploads, title: acquisitions.title, campaignId: acquisitions.campaignId, userName: users.name })
    .from(uploads).innerJoin(acquisitions, eq(acquisitions.id, uploads.acquisitionId)).innerJoin(users, eq(users.id, uploads.userId)).where(eq(uploads.id, uploadId))
  const { upload, title, campaignId, userName } = row!
  await publishEvents(transaction, [{
    type: 'upload', campaignId, payload: {
      id: upload.id, acquisitionId: upload.acquisitionId, acquisitionTitle: title, kind: upload.kind, part: upload.part, filename: upload.filename, bytes: upload.bytes, receivedBytes: upload.receivedBytes,
      state: upload.state, sha256: upload.sha256, message: upload.message, createdAt: upload.createdAt.toISOString(), lastActivityAt: upload.lastActivityAt.toISOString(), userId: upload.userId, userName,
    },
  }])
  return upload.acquisitionId
}
