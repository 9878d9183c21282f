import { mkdir, rm, stat, writeFile } from 'node:fs/promises'
import { dirname, join } from 'node:path'
import { FileStore, type Configstore } from '@tus/file-store'
import { ERRORS, Upload } from '@tus/server'
import type { Database } from '../db/client'
import { finishUpload, removeUpload } from './uploadState'
import { findUpload, type UploadRow } from './uploads'

export const partialKeptMs = 7 * 24 * 3600_000

/** Everything about an upload lies in its row; a second record in a file could only disagree. */
const noConfig: Configstore = { get: async () => undefined, set: async () => {}, delete: async () => {} }

/** The bytes in a folder, one file an upload; the rest in the table of uploads. */
export class UploadStore extends FileStore {
  constructor(readonly folder: string, private readonly database: () => Database) {
    super({ directory: folder, configstore: noConfig, expirationPeriodInMilliseconds: partialKeptMs })
    this.extensions = ['creation', 'creation-with-upload', 'termination', 'expiration']
  }

  pathOf = (id: string) => join(this.folder, id)

  override async create(upload: Upload): Promise<Upload> {
    await mkdir(dirname(this.pathOf(upload.id)), { recursive: true })
    await writeFile(this.pathOf(upload.id), '')
    return upload
  }

  /**
   * Where an upload stands. A complete one is handed on to its proof before anybody hears that it is complete, so
   * that no client reports a success that the database has not heard of.
   */
  override async getUpload(id: string): Promise<Upload> {
    const row = await findUpload(this.database(), id)
    if (!row) throw ERRORS.FILE_NOT_FOUND
    if (row.state === 'refused' || row.state === 'removed') throw ERRORS.FILE_NO_LONGER_EXISTS
    const offset = row.state === 'receiving' ? await this.lengthOf(id) : row.bytes
    if (row.state === 'receiving' && offset === row.bytes) await finishUpload(this.database(), id)
    return describe(row, offset)
  }

  override async remove(id: string): Promise<void> {
    const row = await findUpload(this.database(), id)
    if (row?.state === 'receiving' && await this.lengthOf(id).catch(() => 0) === row.bytes) await finishUpload(this.database(), id)
    if (!await removeUpload(this.database(), id, 'Removed before it was complete.')) throw completeError
    await rm(this.pathOf(id), { force: true })
  }

  private async lengthOf(id: string): Promise<number> {
    try {
      return (await stat(this.pathOf(id))).size
    } catch (error) {
      if ((error as NodeJS.ErrnoException).code === 'ENOENT') throw ERRORS.FILE_NO_LONGER_EXISTS
      throw error
    }
  }
}

const completeError = { status_code: 409, body: 'This upload is complete already, so it cannot be removed. Reload to see its present state.' }

/** tus counts the expiry from this date: only partial uploads run out, and from their last byte on. */
function describe(row: UploadRow, offset: number): Upload {
  const upload = new Upload({
    id: row.id, size: row.bytes, offset, creation_date: row.lastActivityAt.toISOString(),
    metadata: { filename: row.filename, ...(row.filetype && { filetype: row.filetype }), acquisitionId: row.acquisitionId, kind: row.kind, part: String(row.part) },
  })
  if (offset === row.bytes) upload.creation_date = undefined
  return upload
}
