import { and, eq } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import { seesEveryCampaign } from '#shared/permissions'
import type { Scope } from '#shared/routes'
import type { User } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { acquisitions, campaignGuests, campaigns, frameSets, jobs } from '../db/schema'

/**
 * The campaign that a thing belongs to, when it is open to the user. What is not there and what is not open answer
 * alike, so that nobody can probe for ids. A guest sees frame sets only once they are released.
 */
export async function requireScope(user: User, scope: Exclude<Scope, 'none'>, id: string): Promise<string> {
  return findOpenCampaign(useDatabase(), user, scope, id)
}

export async function findOpenCampaign(database: Database, user: User, scope: Exclude<Scope, 'none'>, id: string): Promise<string> {
  const found = await campaignOf[scope](database, id)
  if (!found) throw new LampsumError('not-found')
  if (seesEveryCampaign(user.role)) return found.campaignId
  if (found.released === false || !await isOpenToGuest(database, user.id, found.campaignId)) throw new LampsumError('not-found')
  return found.campaignId
}

interface Found {
  campaignId: string
  released?: boolean
}

const campaignOf: Record<Exclude<Scope, 'none'>, (database: Database, id: string) => Promise<Found | undefined>> = {
  async campaign(database, id) {
    return (await database.select({ campaignId: campaigns.id }).from(campaigns).where(eq(campaigns.id, id)))[0]
  },
  async acquisition(database, id) {
    return (await database.select({ campaignId: acquisitions.campaignId }).from(acquisitions).where(eq(acquisitions.id, id)))[0]
  },
  async job(database, id) {
    return (await database.select({ campaignId: acquisitions.campaignId }).from(jobs).innerJoin(acquisitions, eq(acquisitions.id, jobs.acquisitionId)).where(eq(jobs.id, id)))[0]
  },
  async frameSet(database, id) {
    const [row] = await database.select({ campaignId: acquisitions.campaignId, state: frameSets.state }).from(frameSets)
      .innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId)).where(eq(frameSets.id, id))
    return row && { campaignId: row.campaignId, released: row.state === 'released' }
  },
}

async function isOpenToGuest(database: Database, userId: string, campaignId: string): Promise<boolean> {
  const rows = await database.select({ userId: campaignGuests.userId }).from(campaignGuests)
    .where(and(eq(campaignGuests.userId, userId), eq(campaignGuests.campaignId, campaignId)))
  return rows.length > 0
}
