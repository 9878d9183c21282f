import { and, asc, desc, eq, exists, inArray, isNull, or } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import { seesEveryCampaign } from '#shared/permissions'
import type { User } from '#shared/schemas/people'
import type { FrameSet } from '#shared/schemas/results'
import type { Database } from '../db/client'
import { withRetry } from '../db/retry'
import { acquisitions, campaignGuests, campaigns, frameSetFiles, frameSets, users } from '../db/schema'
import { publishAcquisitionEvent } from './acquisitions'
import { writeAudit } from './audit'
import { afterPosition, decodeCursor, pageOf, type ListPage, type ListQuery } from './lists'

const selectSets = (database: Database) => database
  .select({ set: frameSets, acquisitionNumber: acquisitions.number, acquisitionTitle: acquisitions.title, millimetresPerPixel: acquisitions.millimetresPerPixel, campaignId: campaigns.id, campaignName: campaigns.name, releasedByName: users.name }).from(frameSets)
  .innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId)).innerJoin(campaigns, eq(campaigns.id, acquisitions.campaignId)).leftJoin(users, eq(users.id, frameSets.releasedBy))
type JoinedSet = Awaited<ReturnType<ReturnType<typeof selectSets>['execute']>>[number]

/** Frame sets, newest first. Replaced drafts are left out; replaced ones that were released are not. Guests see released ones of their campaigns. */
export async function listFrameSets(database: Database, user: User, { limit, cursor, acquisitionId, campaignId }: ListQuery & { acquisitionId?: string, campaignId?: string }): Promise<ListPage<FrameSet>> {
  const rows = await selectSets(database).where(and(
    visibleTo(database, user),
    acquisitionId ? eq(frameSets.acquisitionId, acquisitionId) : undefined,
    campaignId ? eq(acquisitions.campaignId, campaignId) : undefined,
    afterPosition(frameSets.createdAt, frameSets.id, decodeCursor(cursor)),
  )).orderBy(desc(frameSets.createdAt), desc(frameSets.id)).limit(limit + 1)
  const page = pageOf(rows.map(row => ({ ...row, createdAt: row.set.createdAt, id: row.set.id })), limit)
  return { items: await withFiles(database, page.rows), nextCursor: page.nextCursor }
}

function visibleTo(database: Database, user: User) {
  if (seesEveryCampaign(user.role)) return or(isNull(frameSets.supersededAt), eq(frameSets.state, 'released'))
  const open = database.select({ id: campaignGuests.userId }).from(campaignGuests).where(and(eq(campaignGuests.campaignId, acquisitions.campaignId), eq(campaignGuests.userId, user.id)))
  return and(eq(frameSets.state, 'released'), exists(open))
}

/** Whether the caller may see it has been checked by the route's scope. */
export async function getFrameSet(database: Database, id: string): Promise<FrameSet> {
  const [set] = await withFiles(database, await selectSets(database).where(eq(frameSets.id, id)))
  if (!set) throw new LampsumError('not-found')
  return set
}

async function withFiles(database: Database, rows: JoinedSet[]): Promise<FrameSet[]> {
  const files = rows.length
    ? await database.select({ frameSetId: frameSetFiles.frameSetId, name: frameSetFiles.name, bytes: frameSetFiles.bytes, sha256: frameSetFiles.sha256 }).from(frameSetFiles)
        .where(inArray(frameSetFiles.frameSetId, rows.map(row => row.set.id))).orderBy(asc(frameSetFiles.name))
    : []
  return rows.map(({ set, acquisitionNumber, acquisitionTitle, millimetresPerPixel, campaignId, campaignName, releasedByName }) => ({
    id: set.id, acquisitionId: set.acquisitionId, acquisitionNumber, acquisitionTitle, campaignId, campaignName,
    line: set.line, frequencyHz: set.frequencyHz, state: set.state, superseded: set.supersededAt !== null, cutListVersion: set.cutListVersion,
    width: set.width, height: set.height, millimetresPerPixel, checks: set.checks, groups: set.groups,
    rejections: set.review?.rejections ?? [], history: set.review?.history ?? [],
    files: files.filter(file => file.frameSetId === set.id).map(({ name, bytes, sha256 }) => ({ name, bytes, sha256 })),
    releasedByName, releasedAt: set.releasedAt?.toISOString() ?? null, releaseNote: set.releaseNote, createdAt: set.createdAt.toISOString(),
  }))
}

/** An analyst's signed statement that the set may leave the laboratory; it cannot be taken back. */
export function releaseFrameSet(database: Database, user: User, id: string, note: string, now = new Date()): Promise<void> {
  return withRetry(() => database.transaction(async (transaction) => {
    const [result] = await transaction.update(frameSets).set({ state: 'released', releasedBy: user.id, releasedAt: now, releaseNote: note })
      .where(and(eq(frameSets.id, id), eq(frameSets.state, 'draft'), isNull(frameSets.supersededAt)))
    const [set] = await transaction.select({ acquisitionId: frameSets.acquisitionId, superseded: frameSets.supersededAt, campaignId: acquisitions.campaignId }).from(frameSets)
      .innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId)).where(eq(frameSets.id, id))
    if (!set) throw new LampsumError('not-found')
    if (!result.affectedRows) throw new LampsumError('wrong-state', set.superseded ? 'A newer run has taken this set’s place. Release the newer one.' : 'This set has been released already.')
    await writeAudit(transaction, { userId: user.id, action: 'frame set released', subject: id, details: { note } })
    await publishAcquisitionEvent(transaction, set.acquisitionId, set.campaignId)
  }))
}
