import { eq, sql } from 'drizzle-orm'
import type { EventType } from '../../shared/events'
import type { Transaction } from './client'
import { eventCounter, events } from './schema'

export interface NewEvent {
  type: EventType
  campaignId: string | null
  payload: Record<string, unknown>
}

/**
 * Writes events as the last thing of a transaction. The counter row stays locked until the commit, so events become
 * visible in the order of their ids and a reader that remembers the last id it saw never misses one.
 */
export async function publishEvents(transaction: Transaction, list: NewEvent[], now = new Date()): Promise<void> {
  if (!list.length) return
  await transaction.update(eventCounter).set({ value: sql`${eventCounter.value} + ${list.length}` }).where(eq(eventCounter.id, 1))
  const [counter] = await transaction.select({ value: eventCounter.value }).from(eventCounter).where(eq(eventCounter.id, 1))
  const first = counter!.value - list.length + 1
  await transaction.insert(events).values(list.map((event, index) => ({ id: first + index, type: event.type, campaignId: event.campaignId, payload: event.payload, createdAt: now })))
}
