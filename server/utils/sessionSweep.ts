import { lt } from 'drizzle-orm'
import type { Database } from '../db/client'
import { accountLinks, sessions } from '../db/schema'
import { deleteOldEvents } from './eventStreamRows'

const linksKeptMs = 30 * 24 * 3600_000

/** Deletes events past their retention, sessions that have expired and links long run out. */
export async function forgetOldRows(database: Database, now = new Date()): Promise<void> {
  await deleteOldEvents(database, now)
  await database.delete(sessions).where(lt(sessions.expiresAt, now))
  await database.delete(accountLinks).where(lt(accountLinks.expiresAt, new Date(now.getTime() - linksKeptMs)))
}
