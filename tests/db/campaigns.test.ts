import { randomUUID } from 'node:crypto'
import { eq } from 'drizzle-orm'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { advanceAcquisition } from '../../jobs/queue/advance'
import { auditEntries, events, frameSets, jobs, stageOutputs } from '../../server/db/schema'
import { changeAcquisition, createAcquisition, listAcquisitions } from '../../server/utils/acquisitions'
import { getAcquisition, getAlignment } from '../../server/utils/acquisitionViews'
import { changeCameraProfile, createCameraProfile, listCameraProfiles } from '../../server/utils/cameraProfiles'
import { changeCampaign, closeToGuest, createCampaign, getCampaign, listCampaigns, listGuests, openToGuest } from '../../server/utils/campaigns'
import { getJob, listJobs, readQueue, setQueuePaused } from '../../server/utils/jobsView'
import { acquisitionCreateSchema } from '../../shared/schemas/campaigns'
import type { User } from '../../shared/schemas/people'
import { openTestDatabase } from '../support/database'
import { insertStoredUpload, insertUser } from '../support/fixtures'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
let analyst: User
let guest: User
const db = () => handle.database
const person = async (role: User['role']): Promise<User> => ({ id: await insertUser(db(), role), email: `${role}@lab.example`, name: role, role })
const makeCampaign = (name: string) => createCampaign(db(), analyst, { name, specimen: 'HC-2', notes: 'The left bolt is loose.' })
const makeAcquisition = (campaignId: string, values: Record<string, unknown> = {}) => createAcquisition(db(), analyst, acquisitionCreateSchema.parse({ campaignId, title: 'sweep', ...values }))

beforeAll(async () => {
  handle = await openTestDatabase()
  analyst = await person('analyst')
  guest = await person('guest')
})
afterAll(() => handle?.close())

describe('campaigns', () => {
  it('are listed newest first, page after page without skip or double, and found by name or specimen', async () => {
    const names = Array.from({ length: 7 }, (_, i) => `Gear 100% test ${i}`)
    for (const name of names) await makeCampaign(name)
    const seen: string[] = []
    for (let cursor: string | undefined; ;) {
      const page = await listCampaigns(db(), analyst, { limit: 3, cursor, search: '100% test' })
      seen.push(...page.items.map(item => item.name))
      if (!page.nextCursor) break
      cursor = page.nextCursor
    }
    expect(seen.slice().sort()).toEqual(names)
    expect((await listCampaigns(db(), analyst, { limit: 3, search: '100_ test' })).items).toEqual([])
    expect((await listCampaigns(db(), analyst, { limit: 3, search: 'hc-2' })).items).toHaveLength(3)
  })

  it('change, and keep what is left out', async () => {
    const id = await makeCampaign('Before')
    await changeCampaign(db(), id, { name: 'After' })
    expect(await getCampaign(db(), analyst, id)).toMatchObject({ name: 'After', specimen: 'HC-2', createdByName: 'The analyst' })
  })

  it('open to a guest and close again; what was not released stays hidden', async () => {
    const id = await makeCampaign('For guests')
    const acquisition = await makeAcquisition(id, { plan: [{ frequencyHz: 100, repetitions: 2 }, { frequencyHz: 200 }] })
    const set = { acquisitionId: acquisition, line: 1, cutListVersion: 1, checks: [], groups: [], width: 1, height: 1, createdAt: new Date() }
    await db().insert(frameSets).values([{ ...set, id: randomUUID(), frequencyHz: 100, state: 'released' }, { ...set, id: randomUUID(), line: 2, frequencyHz: 200, state: 'draft' }])
    expect((await listCampaigns(db(), guest, { limit: 10 })).items).toEqual([])
    expect((await listGuests(db(), id)).candidates.map(each => each.userId)).toContain(guest.id)
    await openToGuest(db(), analyst, id, guest.id)
    await openToGuest(db(), analyst, id, guest.id)
    const [seen] = (await listCampaigns(db(), guest, { limit: 10 })).items
    expect(seen).toMatchObject({ id, notes: null, acquisitionCount: 1, frameSetCount: 1, needsEyeCount: 0 })
    expect(seen!.coverage).toEqual([{ frequencyHz: 100, planned: false, state: 'released', repetitionsPlanned: 0, repetitionsGood: 0, acquisitionId: null }])
    expect((await getCampaign(db(), analyst, id)).coverage.map(line => line.state)).toEqual(['released', 'summed'])
    await closeToGuest(db(), analyst, id, guest.id)
    expect((await listCampaigns(db(), guest, { limit: 10 })).items).toEqual([])
    await expect(closeToGuest(db(), analyst, id, guest.id)).rejects.toMatchObject({ code: 'not-found' })
    expect((await db().select().from(auditEntries).where(eq(auditEntries.subject, id))).map(entry => entry.action)).toEqual(['campaign opened to guest', 'campaign closed to guest'])
  })

  it('open only to people whose role is guest', async () => {
    const id = await makeCampaign('Not for technicians')
    await expect(openToGuest(db(), analyst, id, (await person('technician')).id)).rejects.toMatchObject({ code: 'bad-input' })
  })
})

describe('registering acquisitions', () => {
  it('numbers them one after the other, also when many are registered at once', async () => {
    const campaign = await makeCampaign('Numbers')
    await Promise.all(Array.from({ length: 12 }, () => makeAcquisition(campaign)))
    const numbers = (await listAcquisitions(db(), { limit: 50, campaignId: campaign })).items.map(item => item.number).sort((a, b) => a - b)
    expect(numbers).toEqual(Array.from({ length: 12 }, (_, i) => numbers[0]! + i))
  })

  it('is refused for a campaign that is not there or not open', async () => {
    await expect(makeAcquisition('nowhere')).rejects.toMatchObject({ code: 'not-found' })
    await expect(createAcquisition(db(), guest, acquisitionCreateSchema.parse({ campaignId: await makeCampaign('Closed'), title: 'x' }))).rejects.toMatchObject({ code: 'not-found' })
  })

  it('takes from the camera profile what it is not told', async () => {
    const profile = await createCameraProfile(db(), analyst.id, { name: 'C-mount, 50 mm', frameRateHz: 50, frameExposureSeconds: 0.018, transfer: 'bt709', range: 'limited', millimetresPerPixel: 0.2 })
    const campaign = await makeCampaign('Profiles')
    expect(await getAcquisition(db(), await makeAcquisition(campaign, { cameraProfileId: profile }))).toMatchObject({ frameExposureSeconds: 0.018, transfer: 'bt709', range: 'limited', millimetresPerPixel: 0.2 })
    expect(await getAcquisition(db(), await makeAcquisition(campaign, { cameraProfileId: profile, frameExposureSeconds: null, transfer: 'linear' }))).toMatchObject({ frameExposureSeconds: null, transfer: 'linear' })
    await expect(makeAcquisition(campaign, { cameraProfileId: 'nowhere' })).rejects.toMatchObject({ code: 'bad-input' })
    await changeCameraProfile(db(), analyst.id, profile, { name: 'C-mount, 35 mm', transfer: 'auto', range: 'auto' })
    expect((await listCameraProfiles(db(), { limit: 5 })).items).toEqual([{ id: profile, name: 'C-mount, 35 mm', frameRateHz: null, frameExposureSeconds: null, transfer: 'auto', range: 'auto', millimetresPerPixel: null }])
  })
})

describe('acquisitions', () => {
  it('a list by state pages through all of that state', async () => {
    const campaign = await makeCampaign('States')
    const lacking: string[] = []
    for (let i = 0; i < 9; i++) {
      const id = await makeAcquisition(campaign)
      if (i % 2) continue
      lacking.push(id)
      await insertStoredUpload(db(), id, analyst.id, 'clip')
    }
    const seen: string[] = []
    for (let cursor: string | undefined; ;) {
      const page = await listAcquisitions(db(), { limit: 2, cursor, campaignId: campaign, state: 'needs record' })
      seen.push(...page.items.map(item => item.id))
      if (!page.nextCursor) break
      cursor = page.nextCursor
    }
    expect(seen).toEqual(lacking.reverse())
    expect((await listAcquisitions(db(), { limit: 50, campaignId: campaign, state: 'registered' })).items).toHaveLength(4)
  })

  it('new settings run the stages again that read them, and tell those who watch', async () => {
    const id = await makeAcquisition(await makeCampaign('Settings'))
    await insertStoredUpload(db(), id, analyst.id, 'record')
    await advanceAcquisition(db(), id)
    await db().update(jobs).set({ state: 'needs review', activeKey: null, message: 'No column is the illumination. Say which one is.' }).where(eq(jobs.acquisitionId, id))
    expect(await getAcquisition(db(), id)).toMatchObject({ state: 'needs review', message: 'No column is the illumination. Say which one is.' })
    await changeAcquisition(db(), id, { channels: { columns: { illumination: 'Lamp' } } })
    const page = await getAcquisition(db(), id)
    expect(page).toMatchObject({ state: 'needs clip', channels: { columns: { illumination: 'Lamp' } } })
    expect(page.stages.find(stage => stage.stage === 'record')!.state).toBe('waiting')
    expect((await db().select().from(events)).at(-1)).toMatchObject({ type: 'acquisition', payload: { id } })
  })

  it('shows flags of outputs that count or wait for a decision, and the file behind clip and record', async () => {
    const id = await makeAcquisition(await makeCampaign('Flags'))
    const clip = await insertStoredUpload(db(), id, analyst.id, 'clip')
    const flag = (code: string) => ({ code, severity: 'warning' as const, message: 'Look at it.' })
    const output = { acquisitionId: id, outputKey: 'o', files: {}, createdAt: new Date() }
    await db().insert(stageOutputs).values([
      { ...output, stage: 'inspect', inputsKey: '', facts: { source: { uploadId: clip, filename: 'take.mp4' }, clip: { frameCount: 700 } }, flags: [flag('waits-for-decision')] },
      { ...output, stage: 'meter', inputsKey: 'of other inputs', facts: {}, flags: [flag('stale')] },
    ])
    const page = await getAcquisition(db(), id)
    expect(page.flags).toEqual([{ ...flag('waits-for-decision'), stage: 'inspect' }])
    expect(page.clip).toEqual({ frameCount: 700, source: { uploadId: clip, filename: 'take.mp4' } })
    expect(page.record).toBeNull()
    await expect(getAlignment(db(), id)).rejects.toMatchObject({ code: 'not-found' })
  })
})

describe('the queue', () => {
  it('shows jobs with the names around them, newest first, and the log on its own', async () => {
    const id = await makeAcquisition(await makeCampaign('Jobs'), { title: 'sweep at 40 °C' })
    await insertStoredUpload(db(), id, analyst.id, 'clip')
    await insertStoredUpload(db(), id, analyst.id, 'record')
    await advanceAcquisition(db(), id)
    const page = await listJobs(db(), { limit: 1, acquisitionId: id })
    const rest = await listJobs(db(), { limit: 5, acquisitionId: id, cursor: page.nextCursor! })
    expect([...page.items, ...rest.items].map(job => job.stage).sort()).toEqual(['inspect', 'record'])
    expect(page.items[0]).toMatchObject({ acquisitionTitle: 'sweep at 40 °C', campaignName: 'Jobs', state: 'waiting', runnerName: null })
    expect(page.items[0]).not.toHaveProperty('log')
    expect((await getJob(db(), page.items[0]!.id)).log).toBe('')
  })

  it('pauses and resumes, and counts by state', async () => {
    await setQueuePaused(db(), analyst.id, true)
    expect(await readQueue(db(), 5e9)).toMatchObject({ paused: true, diskFreeBytes: 5e9, framesPerSecond: 0 })
    await setQueuePaused(db(), analyst.id, false)
    const queue = await readQueue(db(), 5e9)
    expect(queue.paused).toBe(false)
    expect(queue.counts.waiting).toBe((await listJobs(db(), { limit: 200, state: 'waiting' })).items.length)
  })
})
