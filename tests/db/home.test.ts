import { randomUUID } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { campaignGuests, frameSets, jobs, uploads } from '../../server/db/schema'
import { readHome } from '../../server/utils/home'
import type { User } from '../../shared/schemas/people'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertStoredUpload, insertUser } from '../support/fixtures'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
const people = {} as Record<User['role'], User>
const db = () => handle.database
const roomy = async () => 1e12
const kinds = async (role: User['role'], free = roomy) => (await readHome(db(), people[role], free)).items.map(item => item.kind)
let failed: string
let draft: string

beforeAll(async () => {
  handle = await openTestDatabase()
  for (const role of ['technician', 'analyst', 'operator', 'admin', 'guest'] as const) people[role] = { id: await insertUser(db(), role), email: `${role}@lab.example`, name: role, role }
  const campaign = await insertCampaign(db(), people.analyst.id)
  const of = (role: User['role'], title: string) => insertAcquisition(db(), campaign, people[role].id, { title })
  await insertStoredUpload(db(), await of('technician', 'lacks its record'), people.technician.id, 'clip')
  failed = await of('analyst', 'has failed')
  const reviewed = await of('analyst', 'is unsure')
  for (const id of [failed, reviewed]) for (const kind of ['clip', 'record'] as const) await insertStoredUpload(db(), id, people.analyst.id, kind)
  const now = new Date()
  const job = { attempts: 1, crashes: 0, priority: 100, progress: 0, createdAt: now, queuedAt: now, notBefore: now }
  await db().insert(jobs).values([
    { ...job, id: randomUUID(), acquisitionId: failed, stage: 'inspect', state: 'failed', message: 'The clip ends after 600 of 1000 frames. Upload it again.' },
    { ...job, id: randomUUID(), acquisitionId: reviewed, stage: 'record', state: 'needs review', message: 'Two columns could be the illumination. Say which one is.' },
  ])
  const uploading = await of('technician', 'is uploading')
  await db().insert(uploads).values({ id: randomUUID(), acquisitionId: uploading, userId: people.technician.id, kind: 'clip', part: 1, filename: 'long.mp4', bytes: 1000, receivedBytes: 427, state: 'receiving', createdAt: now, lastActivityAt: new Date(now.getTime() - 3600_000) })
  draft = randomUUID()
  const set = { acquisitionId: failed, line: 1, cutListVersion: 1, checks: [], groups: [], width: 1, height: 1, createdAt: now }
  await db().insert(frameSets).values([{ ...set, id: draft, frequencyHz: 80, state: 'draft' }, { ...set, id: randomUUID(), frequencyHz: 120, state: 'released', releasedAt: now }])
})
afterAll(() => handle?.close())

describe('home answers “what needs me now”', () => {
  it('by role, the most urgent first', async () => {
    expect(await kinds('technician')).toEqual(['upload', 'record missing'])
    expect(await kinds('analyst')).toEqual(['failed', 'review', 'upload', 'record missing', 'ready'])
    expect(await kinds('operator')).toEqual(['failed'])
    expect(await kinds('operator', async () => 2e9)).toEqual(['disk', 'failed'])
  })

  it('in sentences that say where to go', async () => {
    const { items, counts } = await readHome(db(), people.analyst, roomy)
    expect(items[0]).toMatchObject({ message: expect.stringMatching(/“has failed” failed: The clip ends after 600 of 1000 frames\. Upload it again\.$/), to: `/acquisitions/${failed}` })
    expect(items.find(item => item.kind === 'upload')!.message).toMatch(/^long\.mp4 for acquisition \d+, “is uploading”, is 42 % here\. It has stopped: pick the same file again to go on\.$/)
    expect(items.find(item => item.kind === 'ready')!.to).toBe(`/frame-sets/${draft}`)
    expect(counts).toMatchObject({ failed: 1, review: 1 })
  })

  it('shows guests new releases of their campaigns and nothing else', async () => {
    expect(await kinds('guest')).toEqual([])
    const campaignId = await insertCampaign(db(), people.analyst.id)
    const acquisitionId = await insertAcquisition(db(), campaignId, people.analyst.id)
    const old = new Date(Date.now() - 40 * 24 * 3600_000)
    const set = { acquisitionId, cutListVersion: 1, checks: [], groups: [], width: 1, height: 1, createdAt: old, state: 'released' as const }
    await db().insert(frameSets).values([{ ...set, id: randomUUID(), line: 1, frequencyHz: 80, releasedAt: new Date() }, { ...set, id: randomUUID(), line: 2, frequencyHz: 120, releasedAt: old }])
    await db().insert(campaignGuests).values({ campaignId, userId: people.guest.id, grantedBy: people.analyst.id, createdAt: new Date() })
    const { items } = await readHome(db(), people.guest, roomy)
    expect(items.map(item => item.message)).toEqual([expect.stringMatching(/^The line at 80 Hz of acquisition \d+/)])
  })
})
