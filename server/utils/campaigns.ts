import { randomUUID } from 'node:crypto'
import { and, asc, desc, eq, exists, isNull, like, notInArray, or } from 'drizzle-orm'
import type { z } from 'zod'
import { LampsumError } from '#shared/errors'
import { seesEveryCampaign } from '#shared/permissions'
import type { Campaign, campaignCreateSchema, campaignPatchSchema, guestListSchema } from '#shared/schemas/campaigns'
import type { User } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { isDuplicateKey } from '../db/retry'
import { campaignGuests, campaigns, users } from '../db/schema'
import { writeAudit } from './audit'
import { describeForGuest, describeForStaff } from './campaignViews'
import { afterPosition, containing, decodeCursor, pageOf, type ListPage, type ListQuery } from './lists'

export type CampaignRow = typeof campaigns.$inferSelect & { createdByName: string }

/** Campaigns open to the caller, newest first. */
export async function listCampaigns(database: Database, user: User, { limit, cursor, search }: ListQuery & { search?: string }): Promise<ListPage<Campaign>> {
  const rows = await selectCampaigns(database).where(and(
    seesEveryCampaign(user.role) ? undefined : exists(database.select({ id: campaignGuests.userId }).from(campaignGuests).where(and(eq(campaignGuests.campaignId, campaigns.id), eq(campaignGuests.userId, user.id)))),
    search ? or(like(campaigns.name, containing(search)), like(campaigns.specimen, containing(search))) : undefined,
    afterPosition(campaigns.createdAt, campaigns.id, decodeCursor(cursor)),
  )).orderBy(desc(campaigns.createdAt), desc(campaigns.id)).limit(limit + 1)
  const page = pageOf(rows.map(flatten), limit)
  return { items: await describe(database, user, page.rows), nextCursor: page.nextCursor }
}

export async function getCampaign(database: Database, user: User, id: string): Promise<Campaign> {
  const rows = await selectCampaigns(database).where(eq(campaigns.id, id))
  const [campaign] = await describe(database, user, rows.map(flatten))
  if (!campaign) throw new LampsumError('not-found')
  return campaign
}

const selectCampaigns = (database: Database) => database.select({ campaign: campaigns, createdByName: users.name }).from(campaigns).innerJoin(users, eq(users.id, campaigns.createdBy))
const flatten = ({ campaign, createdByName }: { campaign: typeof campaigns.$inferSelect, createdByName: string }): CampaignRow => ({ ...campaign, createdByName })
const describe = (database: Database, user: User, rows: CampaignRow[]) => seesEveryCampaign(user.role) ? describeForStaff(database, rows) : describeForGuest(database, rows)

export async function createCampaign(database: Database, user: User, values: z.output<typeof campaignCreateSchema>): Promise<string> {
  const id = randomUUID()
  const now = new Date()
  await database.insert(campaigns).values({ id, ...values, createdBy: user.id, createdAt: now, updatedAt: now })
  return id
}

export async function changeCampaign(database: Database, id: string, patch: z.output<typeof campaignPatchSchema>): Promise<void> {
  const [result] = await database.update(campaigns).set({ ...patch, updatedAt: new Date() }).where(eq(campaigns.id, id))
  if (!result.affectedRows) throw new LampsumError('not-found')
}

/** Guests the campaign is open to, and active ones that it could be opened to. */
export async function listGuests(database: Database, campaignId: string): Promise<z.output<typeof guestListSchema>> {
  const person = { userId: users.id, name: users.name, email: users.email }
  const open = await database.select({ ...person, grantedAt: campaignGuests.createdAt }).from(campaignGuests)
    .innerJoin(users, eq(users.id, campaignGuests.userId)).where(eq(campaignGuests.campaignId, campaignId)).orderBy(asc(users.name), asc(users.id))
  const openIds = open.map(guest => guest.userId)
  const candidates = await database.select(person).from(users)
    .where(and(eq(users.role, 'guest'), isNull(users.disabledAt), openIds.length ? notInArray(users.id, openIds) : undefined)).orderBy(asc(users.name), asc(users.id))
  return { items: open.map(guest => ({ ...guest, grantedAt: guest.grantedAt.toISOString() })), candidates }
}

/** Opens the campaign to a guest; once more changes nothing. */
export async function openToGuest(database: Database, user: User, campaignId: string, guestId: string): Promise<void> {
  const [guest] = await database.select({ role: users.role }).from(users).where(and(eq(users.id, guestId), isNull(users.disabledAt)))
  if (guest?.role !== 'guest') throw new LampsumError('bad-input', undefined, { fields: { userId: 'Choose somebody whose role is guest; everybody else sees every campaign already.' } })
  try {
    await database.transaction(async (transaction) => {
      await transaction.insert(campaignGuests).values({ campaignId, userId: guestId, grantedBy: user.id, createdAt: new Date() })
      await writeAudit(transaction, { userId: user.id, action: 'campaign opened to guest', subject: campaignId, details: { guestId } })
    })
  } catch (error) {
    if (!isDuplicateKey(error)) throw error
  }
}

export async function closeToGuest(database: Database, user: User, campaignId: string, guestId: string): Promise<void> {
  await database.transaction(async (transaction) => {
    const [result] = await transaction.delete(campaignGuests).where(and(eq(campaignGuests.campaignId, campaignId), eq(campaignGuests.userId, guestId)))
    if (!result.affectedRows) throw new LampsumError('not-found', 'The campaign is not open to this person.')
    await writeAudit(transaction, { userId: user.id, action: 'campaign closed to guest', subject: campaignId, details: { guestId } })
  })
}
