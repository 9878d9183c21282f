import { eq, sql } from 'drizzle-orm'
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest'
import { createQueue, publishJob } from '../../jobs/queue/mariadbQueue'
import { leaseSeconds, type Claim } from '../../jobs/queue/queue'
import { events, jobs, settings } from '../../server/db/schema'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertUser } from '../support/fixtures'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
let acquisitionId: string
let now = new Date('2026-03-02T09:00:00Z')
const later = (seconds: number) => now = new Date(now.getTime() + seconds * 1000)

beforeAll(async () => {
  handle = await openTestDatabase()
  const user = await insertUser(handle.database)
  acquisitionId = await insertAcquisition(handle.database, await insertCampaign(handle.database, user), user)
})
afterAll(() => handle?.close())
beforeEach(async () => {
  await handle.database.delete(jobs)
  await handle.database.delete(settings)
})

const queueNow = () => createQueue(handle.database, () => now)
const publish = async (stage: 'meter' | 'sum' = 'meter') => (await queueNow().publish({ stage, acquisitionId }))!
const jobOf = async (id: string) => (await handle.database.select().from(jobs).where(eq(jobs.id, id)))[0]!
const claimed = async () => (await queueNow().claim('runner-a'))!

describe('publishing', () => {
  it('queues a stage once while it is active', async () => {
    expect(await publish()).toBeTypeOf('string')
    expect(await queueNow().publish({ stage: 'meter', acquisitionId })).toBeNull()
    await queueNow().settle(await claimed(), { state: 'done', message: 'Done.' })
    expect(await publish()).toBeTypeOf('string')
  })

  it('leaves the caller\'s transaction usable after a second publish of the same work', async () => {
    await handle.database.transaction(async (transaction) => {
      expect(await publishJob(transaction, { stage: 'cut', acquisitionId })).not.toBeNull()
      expect(await publishJob(transaction, { stage: 'cut', acquisitionId })).toBeNull()
      expect(await publishJob(transaction, { stage: 'sum', acquisitionId })).not.toBeNull()
    })
    expect(await handle.database.select().from(jobs)).toHaveLength(2)
  })
})

describe('claiming', () => {
  it('takes the smaller priority first, then the older job', async () => {
    const first = await publish('sum')
    later(1)
    const second = await publish('meter')
    await queueNow().setPriority(second, 10)
    expect((await claimed()).jobId).toBe(second)
    expect((await claimed()).jobId).toBe(first)
    expect(await queueNow().claim('runner-a')).toBeNull()
  })

  it('starts nothing while the queue is paused', async () => {
    await publish()
    await handle.database.insert(settings).values({ name: 'queue.paused', value: true })
    expect(await queueNow().claim('runner-a')).toBeNull()
    await handle.database.update(settings).set({ value: false })
    expect(await queueNow().claim('runner-a')).not.toBeNull()
  })

  it('gives each of 400 jobs to exactly one of 16 claimers', async () => {
    const rows = Array.from({ length: 400 }, (_, index) => ({
      id: `job-${String(index).padStart(4, '0')}`, stage: 'meter' as const, acquisitionId, state: 'waiting' as const, activeKey: `key-${index}`, priority: index % 3, queuedAt: now, notBefore: now,
      attempts: 0, crashes: 0, progress: 0, createdAt: now,
    }))
    await handle.database.insert(jobs).values(rows)
    const seen: string[] = []
    const perClaimer: number[] = []
    await Promise.all(Array.from({ length: 16 }, async (_, index) => {
      const queue = createQueue(handle.database, () => now)
      perClaimer[index] = 0
      for (let claim = await queue.claim(`runner-${index}`); claim; claim = await queue.claim(`runner-${index}`)) {
        seen.push(claim.jobId)
        perClaimer[index]!++
      }
    }))
    expect(seen).toHaveLength(400)
    expect(new Set(seen).size).toBe(400)
    expect(Math.min(...perClaimer), 'nobody starves').toBeGreaterThan(0)
  })
})

describe('the fence', () => {
  it('lets an attempt that lost its lease change nothing', async () => {
    const id = await publish()
    const zombie = await claimed()
    later(leaseSeconds + 1)
    expect(await queueNow().reclaim()).toBe(1)
    const fresh = (await queueNow().claim('runner-b'))!
    expect(fresh.attempt).toBe(zombie.attempt + 1)
    let published = 0
    const results = async () => {
      published++
    }
    expect(await queueNow().heartbeat(zombie, { progress: 0.9 })).toBe('lost')
    expect(await queueNow().settle(zombie, { state: 'done', message: 'Late.' }, results)).toBe(false)
    expect(published).toBe(0)
    expect((await jobOf(id)).progress).toBe(0)
    expect(await queueNow().settle(fresh, { state: 'done', message: 'In time.' }, results)).toBe(true)
    expect(published).toBe(1)
    expect(await jobOf(id)).toMatchObject({ state: 'done', message: 'In time.', attempts: 2 })
  })

  it('writes neither state nor results when publishing the results fails', async () => {
    const id = await publish()
    const claim = await claimed()
    await expect(queueNow().settle(claim, { state: 'done', message: 'Done.' }, async (transaction) => {
      await transaction.insert(settings).values({ name: 'half', value: 1 })
      throw new Error('in the middle')
    })).rejects.toThrow('in the middle')
    expect((await jobOf(id)).state).toBe('running')
    expect(await handle.database.select().from(settings)).toHaveLength(0)
  })

  it('parks a job that took its runner down three times, with the cause', async () => {
    const id = await publish()
    for (let crash = 1; crash <= 3; crash++) {
      await claimed()
      later(leaseSeconds + 1)
      await queueNow().reclaim()
    }
    expect(await jobOf(id)).toMatchObject({ state: 'failed', errorCode: 'runner-crashed', activeKey: null })
    await queueNow().act(id, 'retry')
    expect(await jobOf(id)).toMatchObject({ state: 'waiting', crashes: 0 })
  })

  it('keeps a job whose runner beats', async () => {
    await publish()
    const claim = await claimed()
    for (let beat = 0; beat < 5; beat++) {
      later(leaseSeconds - 1)
      expect(await queueNow().heartbeat(claim, { progress: beat / 5 })).toBe('go on')
      expect(await queueNow().reclaim()).toBe(0)
    }
  })
})

describe('a person\'s actions', () => {
  it('cancels a waiting job at once and tells a running one at its next heartbeat', async () => {
    const waiting = await publish('sum')
    await queueNow().act(waiting, 'cancel')
    expect((await jobOf(waiting)).state).toBe('cancelled')
    const running = await publish('meter')
    const claim = await claimed()
    await queueNow().act(running, 'cancel')
    expect((await jobOf(running)).state).toBe('running')
    expect(await queueNow().heartbeat(claim, { progress: 0.5 })).toBe('cancel')
  })

  it('cancels a job whose runner died after a person had asked for it', async () => {
    const id = await publish()
    await claimed()
    await queueNow().act(id, 'cancel')
    later(leaseSeconds + 1)
    await queueNow().reclaim()
    expect((await jobOf(id)).state).toBe('cancelled')
  })

  it('refuses an action that the state does not allow, in a sentence', async () => {
    const id = await publish()
    await expect(queueNow().act(id, 'retry')).rejects.toThrow('This job is waiting')
    await expect(queueNow().act('no-such-job', 'cancel')).rejects.toMatchObject({ code: 'not-found' })
  })

  it('refuses to retry while the same stage is queued again already', async () => {
    const old = await publish()
    await queueNow().settle(await claimed(), { state: 'failed', message: 'No.' })
    await publish()
    await expect(queueNow().act(old, 'retry')).rejects.toMatchObject({ code: 'wrong-state' })
  })
})

describe('events', () => {
  it('become visible in the order of their ids, without gaps, under concurrent writers', async () => {
    await handle.database.delete(events)
    const [start] = await handle.database.execute(sql`SELECT value FROM event_counter`) as unknown as [{ value: number }[]]
    const seen: number[] = []
    let watching = true
    const watcher = (async () => {
      let cursor = Number(start[0]!.value)
      while (watching || seen.length === 0) {
        const rows = await handle.database.select({ id: events.id }).from(events).where(sql`${events.id} > ${cursor}`).orderBy(events.id)
        for (const row of rows) seen.push(row.id)
        cursor = seen.at(-1) ?? cursor
      }
      const rest = await handle.database.select({ id: events.id }).from(events).where(sql`${events.id} > ${cursor}`).orderBy(events.id)
      seen.push(...rest.map(row => row.id))
    })()
    const ids = await Promise.all((['inspect', 'meter', 'record', 'align', 'cut', 'sum', 'check'] as const).map(stage => queueNow().publish({ stage, acquisitionId })))
    const work = async (claim: Claim | null) => {
      for (let beat = 0; claim && beat < 10; beat++) await queueNow().heartbeat(claim, { progress: beat / 10 })
    }
    await Promise.all(ids.map(async () => work(await queueNow().claim('runner-a'))))
    watching = false
    await watcher
    const first = Number(start[0]!.value) + 1
    expect(seen).toEqual(Array.from({ length: seen.length }, (_, index) => first + index))
    expect(seen.length).toBeGreaterThanOrEqual(7 + 7 + 70)
  })
})
