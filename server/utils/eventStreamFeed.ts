import { heartbeatSeconds, resyncEvent } from '#shared/events'
import { seesEveryCampaign } from '#shared/permissions'
import type { Database } from '../db/client'
import type { StreamClient } from './eventStreamClient'
import { encodeEvents, readEvents, readNewestId, readVisibility, type EventPiece, type EventRow } from './eventStreamRows'
import { findLiveCredentials } from './session'

export interface FeedOptions {
  database: () => Database
  demo: () => boolean
  pollMs?: number
  recheckMs?: number
  heartbeatMs?: number
}

const pageSize = 200
const catchUpSize = 100
const pagesKept = 8
/** A reader this far behind is faster served by loading its lists again. */
const longestReplay = 20_000
const pauseAfterErrorMs = 1000
const sleep = (ms: number) => new Promise<void>(resolve => setTimeout(resolve, ms))

interface EventPage {
  pieces: EventPiece[]
  /** Null when the events after the position are gone. */
  lastId: number | null
}

/** Sends pieces for as long as the client takes them; false when it stopped on the way and has to catch up. */
function deliver(client: StreamClient, pieces: EventPiece[], upTo: number): boolean {
  for (const piece of pieces) {
    if (client.full) return false
    client.send(piece.bytes)
    client.position = piece.lastId
  }
  client.position = Math.max(client.position, upTo)
  return true
}

/**
 * One reader of the events table for all streams of this process; it works only while somebody listens. A client
 * that cannot take more is left alone and catches up from the table later, so nothing piles up in memory.
 */
export class EventFeed {
  private readonly clients = new Set<StreamClient>()
  /** The last event handed to the live clients; null while nobody listens. */
  private newest: number | null = null
  private starting: Promise<void> | undefined
  private timers: NodeJS.Timeout[] = []
  private ended = false

  constructor(private readonly options: FeedOptions) {}

  get size(): number {
    return this.clients.size
  }

  /** Reads where the table stands; throws when the database is away, before anything was sent. */
  async ready(): Promise<void> {
    if (this.newest !== null) return
    this.starting ??= readNewestId(this.options.database()).then((id) => {
      this.newest ??= id
    }).finally(() => {
      this.starting = undefined
    })
    await this.starting
  }

  /** Adds a client; `cursor` is the last id it has seen, null when it has seen none, NaN when what it sent is no id. */
  async join(client: StreamClient, cursor: number | null): Promise<void> {
    const counted = cursor === null ? 0 : await readNewestId(this.options.database())
    while (this.newest === null) await this.ready()
    if (this.ended) return client.close()
    if (client.closed) return
    const known = Math.max(counted, this.newest)
    client.position = cursor ?? known
    this.clients.add(client)
    void client.gone.then(() => this.leave(client))
    client.send(cursor === null ? `retry: 2000\nid: ${known}\n\n` : 'retry: 2000\n\n')
    if (cursor !== null && !(cursor <= known && known - cursor <= longestReplay)) this.resync(client)
    this.start()
    await this.catchUp(client)
  }

  closeAll(): void {
    this.ended = true
    for (const client of this.clients) client.close()
    this.stop()
  }

  private leave(client: StreamClient): void {
    this.clients.delete(client)
    if (!this.clients.size) this.stop()
  }

  private start(): void {
    if (this.timers.length) return
    this.timers = [
      setInterval(() => void this.recheck(), this.options.recheckMs ?? 5000),
      setInterval(() => this.beat(), this.options.heartbeatMs ?? heartbeatSeconds * 1000),
    ]
    void this.poll(this.timers)
  }

  private stop(): void {
    this.timers.forEach(clearInterval)
    this.timers = []
    this.newest = null
    this.pages.clear()
  }

  /** Runs until the timers it was started with are replaced. */
  private async poll(run: NodeJS.Timeout[]): Promise<void> {
    while (this.timers === run) {
      try {
        const rows = await readEvents(this.options.database(), this.newest!, pageSize)
        const maySee = rows.length ? await readVisibility(this.options.database(), this.users()) : undefined
        if (this.timers !== run) return
        if (maySee) this.fanOut(rows, maySee)
        if (rows.length < pageSize) await sleep(this.options.pollMs ?? 200)
      } catch {
        await sleep(pauseAfterErrorMs)
      }
    }
  }

  private users() {
    return [...this.clients].map(client => client.caller.user)
  }

  private fanOut(rows: EventRow[], maySee: Awaited<ReturnType<typeof readVisibility>>): void {
    this.newest = rows.at(-1)!.id
    // The same bytes for everybody who sees the same: 300 streams share one buffer.
    const shared = new Map<string, EventPiece[]>()
    for (const client of this.clients) {
      if (!client.live) continue
      const visible = rows.filter(row => row.id > client.position && maySee(client.caller.user, row))
      const key = visible.map(row => row.id).join()
      if (!shared.has(key)) shared.set(key, encodeEvents(visible))
      client.live = deliver(client, shared.get(key)!, this.newest)
      if (!client.live) void this.catchUp(client)
    }
  }

  private readonly catchingUp = new WeakSet<StreamClient>()

  /** Sends what a client misses, page by page and only as fast as it drains; ends with the client live. */
  private async catchUp(client: StreamClient): Promise<void> {
    if (client.live || this.catchingUp.has(client)) return
    this.catchingUp.add(client)
    while (!client.closed && this.newest !== null) {
      if (client.position >= this.newest) {
        client.live = true
        break
      }
      await this.sendPage(client).catch(() => sleep(pauseAfterErrorMs))
    }
    this.catchingUp.delete(client)
  }

  private async sendPage(client: StreamClient): Promise<void> {
    await client.drained()
    if (client.closed) return
    const { pieces, lastId } = await this.readPage(client)
    if (lastId === null) return this.resync(client)
    for (const piece of pieces) {
      await client.drained()
      client.send(piece.bytes)
      client.position = piece.lastId
    }
    client.position = lastId
  }

  /** Pages by their start, for those who see everything: after a restart all browsers ask for the same ones. */
  private readonly pages = new Map<number, EventPage>()

  /** No more than the coded page outlives this call: it may wait long for a slow reader. */
  private async readPage({ position, caller: { user } }: StreamClient): Promise<EventPage> {
    const seesAll = seesEveryCampaign(user.role)
    const known = seesAll ? this.pages.get(position) : undefined
    if (known) return known
    const rows = await readEvents(this.options.database(), position, catchUpSize)
    // The next id is not there: it was too old to be kept.
    if (rows[0]?.id !== position + 1) return { pieces: [], lastId: null }
    const maySee = await readVisibility(this.options.database(), [user])
    const page = { pieces: encodeEvents(rows.filter(row => maySee(user, row))), lastId: rows.at(-1)!.id }
    if (seesAll && rows.length === catchUpSize) this.pages.set(position, page)
    if (this.pages.size > pagesKept) this.pages.delete(this.pages.keys().next().value!)
    return page
  }

  private resync(client: StreamClient): void {
    client.position = this.newest ?? client.position
    client.send(`id: ${client.position}\nevent: ${resyncEvent}\ndata: {"type":"${resyncEvent}"}\n\n`)
  }

  private beat(): void {
    for (const client of this.clients) if (!client.full) client.send(`: beat\nid: ${client.position}\n\n`)
  }

  /** Closes streams whose credential ended or whose person has another role now, and drops those that stall. */
  private async recheck(): Promise<void> {
    for (const client of this.clients) if (client.stalled) client.drop()
    const clients = [...this.clients]
    try {
      const credentials = new Map(clients.map(client => [client.caller.credential.id, client.caller.credential]))
      const live = await findLiveCredentials(this.options.database(), [...credentials.values()], { demo: this.options.demo() })
      for (const client of clients) if (live.get(client.caller.credential.id)?.user.role !== client.caller.user.role) client.close()
    } catch {
      // While the database is away there is nothing to send either; the next round looks again.
    }
  }
}
