import { and, eq } from 'drizzle-orm'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { advanceAcquisition, restartFrom } from '../../jobs/queue/advance'
import { inputsKey, loadSituation } from '../../jobs/queue/inputs'
import { jobs, stageOutputs, uploads } from '../../server/db/schema'
import type { PipelineStage } from '../../shared/states'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertStoredUpload, insertUser } from '../support/fixtures'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
let user: string
let campaign: string

beforeAll(async () => {
  handle = await openTestDatabase()
  user = await insertUser(handle.database)
  campaign = await insertCampaign(handle.database, user)
})
afterAll(() => handle?.close())

const waiting = async (acquisitionId: string) => (await handle.database.select().from(jobs).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.state, 'waiting')))).map(job => job.stage).sort()

/** As if the stage had run: its job is done and its output is stored under its present key. */
async function finish(acquisitionId: string, stage: PipelineStage, facts: Record<string, unknown> = {}) {
  const key = inputsKey(await loadSituation(handle.database, acquisitionId), stage)!
  await handle.database.update(jobs).set({ state: 'done', activeKey: null }).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.stage, stage)))
  const output = { inputsKey: key, outputKey: `${stage}-${JSON.stringify(facts)}`.slice(0, 64), facts, files: {}, flags: [], createdAt: new Date() }
  await handle.database.insert(stageOutputs).values({ acquisitionId, stage, ...output }).onDuplicateKeyUpdate({ set: output })
  await advanceAcquisition(handle.database, acquisitionId)
}

describe('advancing an acquisition', () => {
  it('runs each stage as soon as what it reads is there, and none twice', async () => {
    const id = await insertAcquisition(handle.database, campaign, user)
    await advanceAcquisition(handle.database, id)
    expect(await waiting(id)).toEqual([])
    await insertStoredUpload(handle.database, id, user, 'clip')
    await Promise.all([advanceAcquisition(handle.database, id), advanceAcquisition(handle.database, id)])
    expect(await waiting(id)).toEqual(['inspect'])
    await finish(id, 'inspect')
    expect(await waiting(id)).toEqual(['meter'])
    await insertStoredUpload(handle.database, id, user, 'record')
    await advanceAcquisition(handle.database, id)
    expect(await waiting(id)).toEqual(['meter', 'record'])
    await finish(id, 'meter')
    expect(await waiting(id)).toEqual(['record'])
    await finish(id, 'record')
    expect(await waiting(id)).toEqual(['align'])
  })

  it('runs what lies behind a changed output again, and nothing before it', async () => {
    const id = await insertAcquisition(handle.database, campaign, user)
    await insertStoredUpload(handle.database, id, user, 'clip')
    await insertStoredUpload(handle.database, id, user, 'record')
    for (const stage of ['inspect', 'meter', 'record'] as const) await finish(id, stage)
    await finish(id, 'align', { version: 1 })
    for (const stage of ['cut', 'sum', 'check'] as const) await finish(id, stage)
    expect(await waiting(id)).toEqual([])
    await finish(id, 'align', { version: 2 })
    expect(await waiting(id)).toEqual(['cut'])
  })

  it('leaves a stage that failed on the same inputs to a person, and tries again when the file is another', async () => {
    const id = await insertAcquisition(handle.database, campaign, user)
    await insertStoredUpload(handle.database, id, user, 'clip')
    await advanceAcquisition(handle.database, id)
    await handle.database.update(jobs).set({ state: 'failed', activeKey: null }).where(eq(jobs.acquisitionId, id))
    await advanceAcquisition(handle.database, id)
    expect(await waiting(id)).toEqual([])
    await handle.database.update(uploads).set({ storedAt: new Date(0) }).where(eq(uploads.acquisitionId, id))
    await insertStoredUpload(handle.database, id, user, 'clip')
    await advanceAcquisition(handle.database, id)
    expect(await waiting(id)).toEqual(['inspect'])
  })

  it('waits for a person when automatic running is off', async () => {
    const id = await insertAcquisition(handle.database, campaign, user, { autoRun: false })
    await insertStoredUpload(handle.database, id, user, 'clip')
    await advanceAcquisition(handle.database, id)
    expect(await waiting(id)).toEqual([])
    await restartFrom(handle.database, id, null)
    expect(await waiting(id)).toEqual(['inspect'])
    await finish(id, 'inspect')
    expect(await waiting(id)).toEqual(['meter'])
  })

  it('says what is missing', async () => {
    const id = await insertAcquisition(handle.database, campaign, user)
    await expect(restartFrom(handle.database, id, 'align')).rejects.toThrow('The clip is missing')
    await insertStoredUpload(handle.database, id, user, 'clip')
    await finish(id, 'inspect')
    await finish(id, 'meter')
    await expect(restartFrom(handle.database, id, 'align')).rejects.toThrow('The record is missing')
  })
})
