import { randomUUID } from 'node:crypto'
import { and, count, desc, eq, inArray, isNull, like, max, or } from 'drizzle-orm'
import type { z } from 'zod'
import { advanceWithin } from '../../jobs/queue/advance'
import { LampsumError } from '#shared/errors'
import type { ChannelMapping } from '#shared/records'
import type { acquisitionCreateSchema, acquisitionListQuerySchema, acquisitionPatchSchema, AcquisitionSummary } from '#shared/schemas/campaigns'
import type { User } from '#shared/schemas/people'
import type { Database, Transaction } from '../db/client'
import { publishEvents } from '../db/events'
import { isDuplicateKey, withRetry } from '../db/retry'
import { acquisitions, cameraProfiles, campaigns, frameSets, users } from '../db/schema'
import { loadSituations, stateOf } from './acquisitionSituations'
import { afterPosition, containing, decodeCursor, encodeCursor, type ListPage } from './lists'
import { findOpenCampaign } from './scope'

export type AcquisitionJoined = { acquisition: typeof acquisitions.$inferSelect, campaignName: string, createdByName: string }

export const selectAcquisitions = (database: Database) => database
  .select({ acquisition: acquisitions, campaignName: campaigns.name, createdByName: users.name }).from(acquisitions)
  .innerJoin(campaigns, eq(campaigns.id, acquisitions.campaignId)).innerJoin(users, eq(users.id, acquisitions.createdBy))

type AcquisitionQuery = z.output<typeof acquisitionListQuerySchema>

/**
 * Acquisitions, newest first. The state is derived, so a list by state reads on until its page is full; its cursor
 * is the last acquisition handed out all the same.
 */
export async function listAcquisitions(database: Database, { limit, cursor, state, ...filter }: AcquisitionQuery): Promise<ListPage<AcquisitionSummary>> {
  const items: AcquisitionSummary[] = []
  const batch = state ? Math.max(100, limit + 1) : limit + 1
  for (let position = decodeCursor(cursor); ;) {
    const rows = await selectAcquisitions(database).where(and(matches(filter), afterPosition(acquisitions.createdAt, acquisitions.id, position)))
      .orderBy(desc(acquisitions.createdAt), desc(acquisitions.id)).limit(batch)
    items.push(...(await summarise(database, rows)).filter(item => !state || item.state === state))
    if (items.length > limit || rows.length < batch) break
    position = rows.at(-1)!.acquisition
  }
  const page = items.slice(0, limit)
  const last = page.at(-1)
  return { items: page, nextCursor: items.length > limit && last ? encodeCursor({ createdAt: new Date(last.createdAt), id: last.id }) : null }
}

function matches({ campaignId, search }: Pick<AcquisitionQuery, 'campaignId' | 'search'>) {
  const number = Number(search)
  return and(
    campaignId ? eq(acquisitions.campaignId, campaignId) : undefined,
    search ? or(like(acquisitions.title, containing(search)), Number.isInteger(number) ? eq(acquisitions.number, number) : undefined) : undefined,
  )
}

export async function summarise(database: Database, rows: AcquisitionJoined[]): Promise<AcquisitionSummary[]> {
  const situations = await loadSituations(database, rows.map(row => row.acquisition))
  const ids = rows.map(row => row.acquisition.id)
  const counts = ids.length
    ? await database.select({ acquisitionId: frameSets.acquisitionId, sets: count() }).from(frameSets).where(and(inArray(frameSets.acquisitionId, ids), isNull(frameSets.supersededAt))).groupBy(frameSets.acquisitionId)
    : []
  return rows.map((row) => {
    const frameSetCount = counts.find(entry => entry.acquisitionId === row.acquisition.id)?.sets ?? 0
    return summaryOf(row, stateOf(situations.get(row.acquisition.id)!, frameSetCount), frameSetCount)
  })
}

export function summaryOf({ acquisition, campaignName, createdByName }: AcquisitionJoined, derived: Pick<AcquisitionSummary, 'state' | 'message'>, frameSetCount: number): AcquisitionSummary {
  const { id, number, campaignId, title, plan, createdAt } = acquisition
  return { id, number, campaignId, campaignName, title, ...derived, lineCount: plan.length, createdAt: createdAt.toISOString(), createdByName, frameSetCount }
}

/** Registers an acquisition under the next free number. What the camera profile knows stands in for what was left out. */
export async function createAcquisition(database: Database, user: User, values: z.output<typeof acquisitionCreateSchema>): Promise<string> {
  await findOpenCampaign(database, user, 'campaign', values.campaignId)
  const profile = await findProfile(database, values.cameraProfileId)
  const id = randomUUID()
  const now = new Date()
  const row = {
    ...values, id, channels: null, createdBy: user.id, createdAt: now, updatedAt: now,
    frameExposureSeconds: values.frameExposureSeconds === undefined ? profile?.frameExposureSeconds : values.frameExposureSeconds,
    millimetresPerPixel: values.millimetresPerPixel === undefined ? profile?.millimetresPerPixel : values.millimetresPerPixel,
    transfer: values.transfer === 'auto' ? profile?.transfer ?? 'auto' : values.transfer,
    range: values.range === 'auto' ? profile?.range ?? 'auto' : values.range,
  }
  await withNextNumber(() => database.transaction(async (transaction) => {
    const [last] = await transaction.select({ number: max(acquisitions.number) }).from(acquisitions)
    await transaction.insert(acquisitions).values({ ...row, number: (last?.number ?? 0) + 1 })
    await publishAcquisitionEvent(transaction, id, values.campaignId)
  }))
  return id
}

/** Others may take the same number at the same moment; the unique index lets one of them have it, the rest try the next. */
async function withNextNumber(work: () => Promise<void>): Promise<void> {
  for (let attempt = 1; ; attempt++) {
    try {
      return await withRetry(work)
    } catch (error) {
      if (!isDuplicateKey(error) || attempt >= 100) throw error
      await new Promise(resolve => setTimeout(resolve, 20 * Math.random()))
    }
  }
}

async function findProfile(database: Database, id: string | null | undefined) {
  if (!id) return null
  const [profile] = await database.select().from(cameraProfiles).where(eq(cameraProfiles.id, id))
  if (!profile) throw new LampsumError('bad-input', undefined, { fields: { cameraProfileId: 'This camera profile does not exist. Choose another, or none.' } })
  return profile
}

/** Changes settings; stages that read what has changed run again. */
export async function changeAcquisition(database: Database, id: string, patch: z.output<typeof acquisitionPatchSchema> & { channels?: ChannelMapping }): Promise<void> {
  await findProfile(database, patch.cameraProfileId)
  await withRetry(() => database.transaction(async (transaction) => {
    const [result] = await transaction.update(acquisitions).set({ ...patch, updatedAt: new Date() }).where(eq(acquisitions.id, id))
    if (!result.affectedRows) throw new LampsumError('not-found')
    await advanceWithin(transaction, id)
    const [row] = await transaction.select({ campaignId: acquisitions.campaignId }).from(acquisitions).where(eq(acquisitions.id, id))
    await publishAcquisitionEvent(transaction, id, row!.campaignId)
  }))
}

export const publishAcquisitionEvent = (transaction: Transaction, id: string, campaignId: string) => publishEvents(transaction, [{ type: 'acquisition', campaignId, payload: { id, campaignId } }])
