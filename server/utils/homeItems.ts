import { and, desc, eq, exists, gt, isNull, sql } from 'drizzle-orm'
import { can } from '#shared/permissions'
import type { User } from '#shared/schemas/people'
import type { AcquisitionSummary } from '#shared/schemas/campaigns'
import type { HomeItem } from '#shared/schemas/results'
import type { Database } from '../db/client'
import { acquisitions, campaignGuests, frameSets, jobs, uploads } from '../db/schema'
import { selectAcquisitions, summarise } from './acquisitions'
import { diskHeadroomBytes } from './uploadSpace'

/** Only the newest acquisitions can need somebody; older ones are found in their campaigns. */
const acquisitionsLookedAt = 300
const releasesShownMs = 30 * 24 * 3600_000
const idleMs = 60_000

/** Acquisitions that failed, wait for a decision, or lack a file. */
export async function stateItems(database: Database, user: User): Promise<HomeItem[]> {
  const rows = await selectAcquisitions(database).orderBy(desc(acquisitions.createdAt), desc(acquisitions.id)).limit(acquisitionsLookedAt)
  const summaries = await summarise(database, rows)
  const own = new Set(rows.filter(row => row.acquisition.createdBy === user.id).map(row => row.acquisition.id))
  return summaries.flatMap(summary => itemOf(summary, user, own.has(summary.id)) ?? [])
}

function itemOf(summary: AcquisitionSummary, user: User, own: boolean): HomeItem | null {
  const { id, state, message, createdAt } = summary
  const name = nameOf(summary).replace(/^a/, 'A')
  const page = `/acquisitions/${id}`
  const mayDecide = can(user.role, 'alignment.write')
  if (state === 'failed' && (own || can(user.role, 'job.control'))) return { kind: 'failed', message: `${name} failed: ${message}`, to: page, at: createdAt }
  if (state === 'needs review' && (own || mayDecide)) return { kind: 'review', message: `${name}: ${message}`, to: page, at: createdAt }
  if (state === 'on hold' && can(user.role, 'job.control')) return { kind: 'failed', message: `${name} is on hold: ${message}`, to: page, at: createdAt }
  const lacksFile = ['registered', 'needs clip', 'needs record'].includes(state)
  if (lacksFile && can(user.role, 'upload.write') && (own || mayDecide)) return { kind: 'record missing', message: `${name}: ${message}`, to: `/intake?acquisition=${id}`, at: createdAt }
  return null
}

const nameOf = ({ number, title }: Pick<AcquisitionSummary, 'number' | 'title'>) => `acquisition ${number}, “${title}”`

/** Uploads that have stopped; a technician sees their own. */
export async function uploadItems(database: Database, user: User, now: Date): Promise<HomeItem[]> {
  const rows = await database.select({ upload: uploads, number: acquisitions.number, title: acquisitions.title }).from(uploads).innerJoin(acquisitions, eq(acquisitions.id, uploads.acquisitionId))
    .where(and(eq(uploads.state, 'receiving'), user.role === 'technician' ? eq(uploads.userId, user.id) : undefined)).orderBy(desc(uploads.lastActivityAt)).limit(200)
  return rows.map(({ upload, ...acquisition }): HomeItem => {
    const share = `${Math.floor(100 * upload.receivedBytes / Math.max(1, upload.bytes))} %`
    const stopped = now.getTime() - upload.lastActivityAt.getTime() > idleMs
    return {
      kind: 'upload', to: `/intake?acquisition=${upload.acquisitionId}`, at: upload.lastActivityAt.toISOString(),
      message: `${upload.filename} for ${nameOf(acquisition)}, is ${share} here${stopped ? '. It has stopped: pick the same file again to go on.' : ' and still arriving.'}`,
    }
  })
}

/** Warns while there is still room to act: at five times what uploads have to leave free. */
export async function diskItems(freeBytes: () => Promise<number>): Promise<HomeItem[]> {
  const free = await freeBytes()
  if (free > 5 * diskHeadroomBytes()) return []
  return [{ kind: 'disk', message: `Only ${(free / 1e9).toFixed(1)} GB of disk are free. Free some space before uploads are refused.`, to: '/queue', at: null }]
}

/** Drafts that wait for an analyst's release, one item an acquisition. */
export async function draftItems(database: Database): Promise<HomeItem[]> {
  const rows = await database.select({ id: frameSets.id, acquisitionId: frameSets.acquisitionId, createdAt: frameSets.createdAt, number: acquisitions.number, title: acquisitions.title }).from(frameSets)
    .innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId)).where(and(eq(frameSets.state, 'draft'), isNull(frameSets.supersededAt))).orderBy(desc(frameSets.createdAt)).limit(500)
  const byAcquisition = new Map<string, typeof rows>()
  for (const row of rows) byAcquisition.set(row.acquisitionId, [...byAcquisition.get(row.acquisitionId) ?? [], row])
  return [...byAcquisition.values()].map((sets): HomeItem => ({
    kind: 'ready', at: sets[0]!.createdAt.toISOString(),
    message: sets.length === 1 ? `A frame set of ${nameOf(sets[0]!)}, is ready to look at and release.` : `${sets.length} frame sets of ${nameOf(sets[0]!)}, are ready to look at and release.`,
    to: sets.length === 1 ? `/frame-sets/${sets[0]!.id}` : `/acquisitions/${sets[0]!.acquisitionId}`,
  }))
}

/** New releases in the guest's campaigns. */
export async function releaseItems(database: Database, user: User, now: Date): Promise<HomeItem[]> {
  const open = database.select({ id: campaignGuests.userId }).from(campaignGuests).where(and(eq(campaignGuests.campaignId, acquisitions.campaignId), eq(campaignGuests.userId, user.id)))
  const rows = await database.select({ id: frameSets.id, frequencyHz: frameSets.frequencyHz, releasedAt: frameSets.releasedAt, number: acquisitions.number, title: acquisitions.title }).from(frameSets)
    .innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId))
    .where(and(eq(frameSets.state, 'released'), gt(frameSets.releasedAt, new Date(now.getTime() - releasesShownMs)), exists(open))).orderBy(desc(frameSets.releasedAt)).limit(200)
  return rows.map(row => ({ kind: 'release', message: `The line at ${Number(row.frequencyHz.toFixed(2))} Hz of ${nameOf(row)}, was released.`, to: `/frame-sets/${row.id}`, at: row.releasedAt!.toISOString() }))
}

export async function processingItems(database: Database): Promise<HomeItem[]> {
  const [row] = await database.select({ acquisitions: sql<number>`COUNT(DISTINCT ${jobs.acquisitionId})`.mapWith(Number) }).from(jobs).where(sql`${jobs.state} IN ('running', 'waiting')`)
  if (!row?.acquisitions) return []
  return [{ kind: 'processing', message: row.acquisitions === 1 ? 'One acquisition is being processed.' : `${row.acquisitions} acquisitions are being processed.`, to: '/queue', at: null }]
}
