import { readdir, rm, stat } from 'node:fs/promises'
import { join } from 'node:path'
import { and, eq, inArray, lt } from 'drizzle-orm'
import type { Database } from '../db/client'
import { uploads } from '../db/schema'
import { finishUpload, removeUpload } from './uploadState'
import { partialKeptMs } from './uploadStore'

const hourMs = 3600_000

const sizeOf = (path: string) => stat(path).then(found => found.size, () => null)

/** Hands on uploads whose last byte arrived but whose hook failed or never ran. Answers how many. */
export async function finishCompleteUploads(database: Database, folder: string): Promise<number> {
  const receiving = await database.select({ id: uploads.id, bytes: uploads.bytes }).from(uploads).where(eq(uploads.state, 'receiving'))
  let finished = 0
  for (const { id, bytes } of receiving) {
    if (await sizeOf(join(folder, id)) === bytes && await finishUpload(database, id)) finished++
  }
  return finished
}

/** Gives up partial uploads that got no byte for seven days. Complete ones never run out. Answers how many. */
export async function removeIdleUploads(database: Database, folder: string, now = new Date()): Promise<number> {
  const idleSince = new Date(now.getTime() - partialKeptMs)
  const idle = await database.select({ id: uploads.id, bytes: uploads.bytes }).from(uploads).where(and(eq(uploads.state, 'receiving'), lt(uploads.lastActivityAt, idleSince)))
  let removed = 0
  for (const { id, bytes } of idle) {
    const path = join(folder, id)
    if (await sizeOf(path) === bytes || !await removeUpload(database, id, 'Nothing arrived for seven days, so what was here was removed. Upload the file again.', idleSince)) continue
    await rm(path, { force: true })
    removed++
  }
  return removed
}

/** Deletes files in the incoming folder that belong to no upload any more; refused ones stay for a week, to be looked at. */
export async function sweepIncoming(database: Database, folder: string, now = new Date()): Promise<void> {
  const names = await readdir(folder).catch(() => [])
  if (!names.length) return
  const rows = await database.select({ id: uploads.id, state: uploads.state, lastActivityAt: uploads.lastActivityAt }).from(uploads).where(inArray(uploads.id, names))
  const known = new Map(rows.map(row => [row.id, row]))
  for (const name of names) {
    const row = known.get(name)
    const useless = row ? row.state === 'removed' || (row.state === 'refused' && now.getTime() - row.lastActivityAt.getTime() > partialKeptMs) : await isOlderThan(join(folder, name), hourMs, now)
    if (useless) await rm(join(folder, name), { force: true, recursive: true })
  }
}

async function isOlderThan(path: string, ms: number, now: Date): Promise<boolean> {
  const found = await stat(path).catch(() => null)
  return found !== null && now.getTime() - found.mtimeMs > ms
}
