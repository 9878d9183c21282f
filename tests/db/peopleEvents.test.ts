import { randomUUID } from 'node:crypto'
import { createServer, type Server } from 'node:http'
import { connect, type AddressInfo, type Socket } from 'node:net'
import { and, eq, lt } from 'drizzle-orm'
import { afterAll, afterEach, beforeAll, beforeEach, describe, expect, it, vi } from 'vitest'
import type { EventType } from '../../shared/events'
import type { Role } from '../../shared/permissions'
import type { DatabaseHandle } from '../../server/db/client'
import { publishEvents } from '../../server/db/events'
import { withRetry } from '../../server/db/retry'
import { campaignGuests, eventCounter, events, sessions, users } from '../../server/db/schema'
import { largestBufferBytes, StreamClient } from '../../server/utils/eventStreamClient'
import { EventFeed } from '../../server/utils/eventStreamFeed'
import { deleteOldEvents } from '../../server/utils/eventStreamRows'
import type { Caller } from '../../server/utils/session'
import { insertCampaign, insertUser } from '../support/fixtures'
import { openTestDatabase } from '../support/database'

let handle: DatabaseHandle
let feed: EventFeed
let server: Server
const callers = new Map<string, Caller>()
const db = () => handle.database

beforeAll(async () => {
  handle = await openTestDatabase()
})
afterAll(() => handle.close())

beforeEach(async () => {
  feed = new EventFeed({ database: db, demo: () => false, pollMs: 20, recheckMs: 50, heartbeatMs: 100 })
  server = createServer((request, response) => {
    const url = new URL(request.url!, 'http://local')
    response.writeHead(200, { 'content-type': 'text/event-stream' })
    response.flushHeaders()
    const cursor = url.searchParams.get('cursor')
    void feed.join(new StreamClient(response, callers.get(url.searchParams.get('caller')!)!), cursor === null ? null : Number(cursor))
  })
  await new Promise<void>(resolve => server.listen(0, '127.0.0.1', resolve))
})
afterEach(async () => {
  feed.closeAll()
  server.closeAllConnections()
  await new Promise(resolve => server.close(resolve))
})

async function insertCaller(role: Role = 'analyst'): Promise<string> {
  const userId = await insertUser(db(), role)
  const id = randomUUID()
  const now = new Date()
  await db().insert(sessions).values({ id, userId, createdAt: now, lastSeenAt: now, expiresAt: new Date(now.getTime() + 3600_000) })
  callers.set(id, { user: { id: userId, role, email: '', name: '' }, credential: { kind: 'session', id } })
  return id
}

const publish = (count: number, event: { type?: EventType, campaignId?: string | null, payload?: Record<string, unknown> } = {}) => withRetry(() => db().transaction(transaction =>
  publishEvents(transaction, Array.from({ length: count }, () => ({ type: event.type ?? 'job', campaignId: event.campaignId ?? null, payload: event.payload ?? { id: 'x' } })))))

async function newestId(): Promise<number> {
  return (await db().select().from(eventCounter))[0]!.value
}

interface Seen { id?: number, event?: string, data?: { type: string } & Record<string, unknown> }

/** Reads a stream by the rules of the HTML standard, section 9.2.6. */
class Reader {
  readonly seen: Seen[] = []
  cursor: number | undefined
  comments = 0
  ended: Promise<void>
  private readonly abort = new AbortController()

  constructor(caller: string, cursor?: number | string) {
    const { port } = server.address() as AddressInfo
    this.ended = this.read(`http://127.0.0.1:${port}/?caller=${caller}${cursor === undefined ? '' : `&cursor=${cursor}`}`).catch(() => {})
  }

  private async read(url: string) {
    const response = await fetch(url, { signal: this.abort.signal })
    let rest = ''
    for await (const chunk of response.body!.pipeThrough(new TextDecoderStream())) {
      const blocks = (rest + chunk).split('\n\n')
      rest = blocks.pop()!
      for (const block of blocks) this.take(block)
    }
  }

  private take(block: string) {
    const seen: Seen = {}
    for (const line of block.split('\n')) {
      if (line.startsWith(':')) this.comments++
      if (line.startsWith('id: ')) seen.id = this.cursor = Number(line.slice(4))
      if (line.startsWith('event: ')) seen.event = line.slice(7)
      if (line.startsWith('data: ')) seen.data = JSON.parse(line.slice(6))
    }
    if (seen.data) this.seen.push(seen)
  }

  cut() {
    this.abort.abort()
    return this.ended
  }
}

const ids = (reader: Reader) => reader.seen.map(each => each.id)
const range = (from: number, to: number) => Array.from({ length: to - from + 1 }, (_, index) => from + index)

describe('the live stream', () => {
  it('sends what is published from now on, each with id, type and payload', async () => {
    await publish(2)
    const reader = new Reader(await insertCaller())
    await vi.waitFor(() => expect(reader.cursor).toBeDefined())
    const before = await newestId()
    await publish(1, { type: 'upload', payload: { id: 'u1', note: 'two\nlines' } })
    await vi.waitFor(() => expect(reader.seen).toEqual([{ id: before + 1, event: 'upload', data: { type: 'upload', id: 'u1', note: 'two\nlines' } }]))
  })

  it('is exact when cut 100 times while events go on: no gap, no double, in order', async () => {
    const caller = await insertCaller()
    const start = await newestId()
    let publishing = true
    const publishers = [1, 2].map(async () => {
      while (publishing) await publish(1 + Math.floor(Math.random() * 5))
    })
    const received: number[] = []
    let cursor = start
    for (let cut = 0; cut < 100; cut++) {
      const reader = new Reader(caller, cursor)
      await new Promise(resolve => setTimeout(resolve, Math.random() * 40))
      await reader.cut()
      received.push(...ids(reader) as number[])
      cursor = reader.cursor ?? cursor
    }
    publishing = false
    await Promise.all(publishers)
    const end = await newestId()
    const last = new Reader(caller, cursor)
    await vi.waitFor(() => expect(last.cursor ?? cursor).toBe(end), 10_000)
    received.push(...ids(last) as number[])
    expect(end - start).toBeGreaterThan(100)
    expect(received).toEqual(range(start + 1, end))
  })

  it('goes on at the next event for a reader that had none when it was cut', async () => {
    const caller = await insertCaller()
    const first = new Reader(caller)
    await vi.waitFor(() => expect(first.cursor).toBeDefined())
    await first.cut()
    const before = await newestId()
    await publish(3)
    const second = new Reader(caller, first.cursor)
    await vi.waitFor(() => expect(ids(second)).toEqual(range(before + 1, before + 3)))
  })

  it('says resync, then goes on from now, when the cursor is too old, from the future or no number', async () => {
    await publish(10)
    const newest = await newestId()
    await db().update(events).set({ createdAt: new Date(Date.now() - 25 * 3600_000) }).where(lt(events.id, newest - 4))
    await deleteOldEvents(db())
    expect(await db().select().from(events).where(lt(events.id, newest - 4))).toEqual([])
    const caller = await insertCaller()
    for (const cursor of [1, newest - 6, newest + 1000, 'NaN']) {
      const reader = new Reader(caller, cursor)
      await vi.waitFor(() => expect(reader.seen).toEqual([{ id: newest, event: 'resync', data: { type: 'resync' } }]))
      await reader.cut()
    }
    const kept = new Reader(caller, newest - 5)
    await vi.waitFor(() => expect(ids(kept)).toEqual(range(newest - 4, newest)))
  })

  it('beats with a comment while nothing happens', async () => {
    const reader = new Reader(await insertCaller())
    await vi.waitFor(() => expect(reader.comments).toBeGreaterThan(1))
    expect(reader.seen).toEqual([])
  })

  it('goes on after the database was away', async () => {
    const reader = new Reader(await insertCaller())
    await vi.waitFor(() => expect(reader.cursor).toBeDefined())
    const before = await newestId()
    const broken = handle
    const away = () => {
      throw new Error('The database is away.')
    }
    handle = { ...handle, database: new Proxy({}, { get: () => away }) as typeof handle.database }
    await new Promise(resolve => setTimeout(resolve, 200))
    handle = broken
    await publish(1)
    await vi.waitFor(() => expect(ids(reader)).toEqual([before + 1]), 5000)
  })
})

describe('who gets what', () => {
  it('gives guests only acquisitions of campaigns that are open to them at that moment', async () => {
    const guest = await insertCaller('guest')
    const analyst = await insertCaller('analyst')
    const author = callers.get(analyst)!.user.id
    const [open, closed] = [await insertCampaign(db(), author), await insertCampaign(db(), author)]
    await db().insert(campaignGuests).values({ campaignId: open, userId: callers.get(guest)!.user.id, grantedBy: author, createdAt: new Date() })
    const start = await newestId()
    const live = new Reader(guest)
    const all = new Reader(analyst)
    await vi.waitFor(() => expect(live.cursor !== undefined && all.cursor !== undefined).toBe(true))
    for (const campaignId of [open, closed]) for (const type of ['job', 'acquisition', 'upload', 'runner'] as const) await publish(1, { type, campaignId })
    await vi.waitFor(() => expect(ids(all)).toEqual(range(start + 1, start + 8)))
    await vi.waitFor(() => expect(live.cursor).toBe(start + 8))
    expect(live.seen.map(each => [each.id, each.event])).toEqual([[start + 2, 'acquisition']])
    const replay = new Reader(guest, start)
    await vi.waitFor(() => expect(replay.cursor).toBe(start + 8))
    expect(ids(replay)).toEqual([start + 2])
    await db().delete(campaignGuests).where(and(eq(campaignGuests.campaignId, open)))
    await publish(1, { type: 'acquisition', campaignId: open })
    await vi.waitFor(() => expect(live.cursor).toBe(start + 9))
    expect(ids(live)).toEqual([start + 2])
  })

  it.each([
    ['the session ends', (caller: Caller) => db().delete(sessions).where(eq(sessions.id, caller.credential.id))],
    ['the session expires', (caller: Caller) => db().update(sessions).set({ expiresAt: new Date(Date.now() - 1) }).where(eq(sessions.id, caller.credential.id))],
    ['the person is disabled', (caller: Caller) => db().update(users).set({ disabledAt: new Date() }).where(eq(users.id, caller.user.id))],
    ['the person gets another role', (caller: Caller) => db().update(users).set({ role: 'guest' }).where(eq(users.id, caller.user.id))],
  ])('closes when %s, and leaves other streams open', async (_, change) => {
    const [caller, other] = [await insertCaller('analyst'), await insertCaller('analyst')]
    const reader = new Reader(caller)
    const stays = new Reader(other)
    await vi.waitFor(() => expect(feed.size).toBe(2))
    await change(callers.get(caller)!)
    await reader.ended
    await publish(1)
    await vi.waitFor(() => expect(stays.seen).toHaveLength(1))
    expect(reader.seen).toEqual([])
  })

  it('closes every stream when the server stops, and takes no new one', async () => {
    const caller = await insertCaller()
    const readers = [new Reader(caller), new Reader(caller)]
    await vi.waitFor(() => expect(feed.size).toBe(2))
    feed.closeAll()
    await Promise.all(readers.map(reader => reader.ended))
    await new Reader(caller).ended
    expect(feed.size).toBe(0)
  })
})

describe('readers that stall', () => {
  it('hold at most a bounded buffer here, and get everything once they read again', async () => {
    const caller = await insertCaller()
    const { port } = server.address() as AddressInfo
    const buffered: number[] = []
    let client: StreamClient | undefined
    const join = feed.join.bind(feed)
    feed.join = (each, cursor) => join(client = each, cursor)
    const socket: Socket = connect(port, '127.0.0.1')
    socket.write(`GET /?caller=${caller} HTTP/1.1\r\nhost: local\r\n\r\n`)
    await vi.waitFor(() => expect(client?.live).toBe(true))
    socket.pause()
    const before = await newestId()
    // About 24 MB: far more than the kernel's buffers of a loopback connection.
    for (let round = 0; round < 24; round++) {
      await publish(20, { payload: { id: 'x', filler: 'y'.repeat(50_000) } })
      buffered.push(client!.response.writableLength)
    }
    await vi.waitFor(() => expect(client!.full).toBe(true))
    expect(Math.max(...buffered)).toBeLessThan(largestBufferBytes)
    expect(client!.closed).toBe(false)
    let text = ''
    socket.on('data', chunk => text += chunk.toString('latin1'))
    socket.resume()
    const after = await newestId()
    await vi.waitFor(() => expect(text).toContain(`id: ${after}\nevent`), 20_000)
    expect([...text.matchAll(/id: (\d+)\nevent/g)].map(match => Number(match[1]))).toEqual(range(before + 1, after))
    socket.destroy()
  })

  it('are dropped after twenty seconds without reading', async () => {
    const response = { closed: false, writableLength: 0, once: () => {}, on: () => {}, write: () => false, destroy: vi.fn() }
    let now = 0
    const client = new StreamClient(response as never, callers.values().next().value!, () => now)
    client.send('x')
    now = 20_000
    expect(client.stalled).toBe(false)
    now = 20_001
    expect(client.stalled).toBe(true)
  })
})
