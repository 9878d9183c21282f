import { and, eq } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { FrameSetState } from '#shared/states'
import type { Database } from '../db/client'
import { acquisitions, frameSetFiles, frameSets } from '../db/schema'
import type { FileStore } from '../store/fileStore'
import type { Download } from './fileDownload'

export async function findFrameSetFile(database: Database, frameSetId: string, name: string) {
  const [row] = await database.select({ file: frameSetFiles, line: frameSets.line, state: frameSets.state, groups: frameSets.groups, acquisitionNumber: acquisitions.number }).from(frameSetFiles)
    .innerJoin(frameSets, eq(frameSets.id, frameSetFiles.frameSetId)).innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId))
    .where(and(eq(frameSetFiles.frameSetId, frameSetId), eq(frameSetFiles.name, name)))
  if (!row) throw new LampsumError('not-found', 'The frame set has no such file. See its list of files.')
  return row
}

/** A file of a set, under a name that still says what it is when it lies in a folder of downloads. */
export async function frameSetDownload(database: Database, store: FileStore, frameSetId: string, name: string): Promise<Download> {
  const { file, line, state, acquisitionNumber } = await findFrameSetFile(database, frameSetId, name)
  const saveAs = `acquisition-${acquisitionNumber}-line-${line}-${file.name.replaceAll(/[^\w.-]/g, '_')}`
  return {
    bytes: file.bytes, contentType: file.contentType, tag: file.sha256,
    headers: { ...cachingOf(state), 'repr-digest': reprDigest(file.sha256), 'content-disposition': `attachment; filename="${saveAs}"` },
    open: range => store.openRange(file.fileKey, range),
  }
}

/** A draft may be solved again under the same address: ask each time, by ETag. A released set stays (RFC 9111, RFC 8246). */
export const cachingOf = (state: FrameSetState) => ({ 'cache-control': state === 'released' ? 'private, max-age=31536000, immutable' : 'private, no-cache' })

/** RFC 9530: the digest of the whole file, whatever part of it is sent. */
export const reprDigest = (sha256: string) => `sha-256=:${Buffer.from(sha256, 'hex').toString('base64')}:`
