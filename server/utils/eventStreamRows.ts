import { and, asc, eq, gt, inArray, lt } from 'drizzle-orm'
import { eventRetentionHours } from '#shared/events'
import { seesEveryCampaign } from '#shared/permissions'
import type { User } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { campaignGuests, eventCounter, events } from '../db/schema'

export type EventRow = Pick<typeof events.$inferSelect, 'id' | 'type' | 'campaignId' | 'payload'>

/** Events after a position. Ids have no gaps, because counter and event are written in one transaction. */
export function readEvents(database: Database, after: number, limit: number): Promise<EventRow[]> {
  return database.select({ id: events.id, type: events.type, campaignId: events.campaignId, payload: events.payload }).from(events)
    .where(gt(events.id, after)).orderBy(asc(events.id)).limit(limit)
}

export async function readNewestId(database: Database): Promise<number> {
  const [row] = await database.select({ value: eventCounter.value }).from(eventCounter).where(eq(eventCounter.id, 1))
  return row?.value ?? 0
}

export type MaySee = (user: User, row: EventRow) => boolean

/** Guests see only acquisitions of campaigns that are open to them at this moment. */
export async function readVisibility(database: Database, users: User[]): Promise<MaySee> {
  const guestIds = [...new Set(users.filter(user => !seesEveryCampaign(user.role)).map(user => user.id))]
  const grants = guestIds.length ? await database.select().from(campaignGuests).where(inArray(campaignGuests.userId, guestIds)) : []
  const open = new Set(grants.map(grant => `${grant.userId} ${grant.campaignId}`))
  return (user, row) => seesEveryCampaign(user.role) || (row.type === 'acquisition' && open.has(`${user.id} ${row.campaignId}`))
}

export interface EventPiece {
  bytes: Buffer
  lastId: number
}

const pieceBytes = 32 * 1024

/** Events in the stream's form, in pieces small enough that a slow reader never has much waiting for it. */
export function encodeEvents(rows: EventRow[]): EventPiece[] {
  const pieces: EventPiece[] = []
  let text = ''
  for (const [index, row] of rows.entries()) {
    text += `id: ${row.id}\nevent: ${row.type}\ndata: ${JSON.stringify({ ...row.payload, type: row.type })}\n\n`
    if (text.length < pieceBytes && index < rows.length - 1) continue
    pieces.push({ bytes: Buffer.from(text), lastId: row.id })
    text = ''
  }
  return pieces
}

/** Deletes events that are too old to be replayed, in small steps so that publishers never wait long. */
export async function deleteOldEvents(database: Database, now = new Date()): Promise<number> {
  const before = new Date(now.getTime() - eventRetentionHours * 3600_000)
  for (let deleted = 0; ;) {
    const [result] = await database.delete(events).where(and(lt(events.createdAt, before))).orderBy(asc(events.id)).limit(2000)
    deleted += result.affectedRows
    if (result.affectedRows < 2000) return deleted
  }
}
