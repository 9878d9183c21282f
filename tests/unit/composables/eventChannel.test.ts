import { describe, expect, it, vi } from 'vitest'
import { EventChannel, type BroadcastLike, type LiveStatus, type SourceLike } from '../../../composables/eventChannel'

/** A browser with tabs: locks and broadcasts as the platform has them, streams that the test drives. */
function browser() {
  const posts = new Map<string, Set<BroadcastLike>>()
  const waiting: (() => void)[] = []
  let held = false
  const sources: (SourceLike & { url: string, closed: boolean, emit: (type: string, id: string, data: unknown) => void })[] = []

  const openBroadcast = (name: string) => {
    const set = posts.get(name) ?? new Set()
    posts.set(name, set)
    const self: BroadcastLike = {
      onmessage: null,
      postMessage: data => [...set].filter(other => other !== self).forEach(other => other.onmessage?.({ data: structuredClone(data) } as MessageEvent)),
      close: () => set.delete(self),
    }
    set.add(self)
    return self
  }
  const locks = {
    request: async (_name: string, options: { signal: AbortSignal }, work: () => Promise<void>) => {
      if (held) {
        await new Promise<void>((resolve, reject) => {
          waiting.push(resolve)
          options.signal.addEventListener('abort', () => reject(new DOMException('gone', 'AbortError')))
        })
      }
      held = true
      await work()
      held = false
      waiting.shift()?.()
    },
  } as unknown as Pick<LockManager, 'request'>
  const openSource = (url: string) => {
    const listeners = new Map<string, (event: MessageEvent) => void>()
    const source = {
      url, readyState: 1, closed: false, onopen: null, onerror: null,
      addEventListener: (type: string, listener: (event: MessageEvent) => void) => void listeners.set(type, listener),
      close() { source.closed = true },
      emit: (type: string, id: string, data: unknown) => listeners.get(type)?.({ lastEventId: id, data: JSON.stringify(data) } as MessageEvent),
    }
    sources.push(source)
    return source
  }
  const tab = (alone = false) => {
    const seen: [string, unknown][] = []
    const statuses: LiveStatus[] = []
    const refused = vi.fn()
    const channel = new EventChannel('live', alone ? { openSource } : { openSource, openBroadcast, locks }, { event: (type, data) => seen.push([type, data]), status: status => statuses.push(status), refused })
    return { channel, seen, statuses, refused }
  }
  return { tab, sources }
}
const settle = () => new Promise(resolve => setTimeout(resolve, 0))

describe('one stream per browser', () => {
  it('opens one stream for ten tabs, and every tab hears each event once', async () => {
    const { tab, sources } = browser()
    const tabs = Array.from({ length: 10 }, () => tab())
    expect(sources).toHaveLength(1)
    sources[0]!.onopen?.(new Event('open'))
    sources[0]!.emit('job', '7', { id: 'j1', state: 'running' })
    for (const { seen, statuses } of tabs) {
      expect(seen).toEqual([['job', { id: 'j1', state: 'running' }]])
      expect(statuses.at(-1)).toBe('live')
    }
  })
  it('tells a tab that comes later how the stream stands', () => {
    const { tab, sources } = browser()
    tab()
    sources[0]!.onopen?.(new Event('open'))
    expect(tab().statuses).toEqual(['live'])
  })
  it('hands over to the next tab, which goes on after the last event and has everybody load again', async () => {
    const { tab, sources } = browser()
    const [first, second, third] = [tab(), tab(), tab()]
    sources[0]!.onopen?.(new Event('open'))
    sources[0]!.emit('upload', '41', { id: 'u' })
    first.channel.leave()
    await settle()
    expect(sources[0]!.closed).toBe(true)
    expect(sources).toHaveLength(2)
    expect(sources[1]!.url).toBe('/api/events?lastEventId=41')
    for (const { seen } of [second, third]) expect(seen.at(-1)).toEqual(['resync', null])
    sources[1]!.emit('job', '42', { id: 'j' })
    expect(third.seen.at(-1)).toEqual(['job', { id: 'j' }])
    expect(first.seen).toHaveLength(1)
  })
  it('does not ask anybody to load again at the very start', () => {
    const { tab } = browser()
    expect(tab().seen).toEqual([])
  })
  it('reads its own stream where tabs cannot talk', () => {
    const { tab, sources } = browser()
    tab(true)
    tab(true)
    expect(sources).toHaveLength(2)
  })
})

describe('a stream that breaks', () => {
  it('leaves short breaks to the browser and says reconnecting', () => {
    const { tab, sources } = browser()
    const { statuses } = tab()
    sources[0]!.onopen?.(new Event('open'))
    sources[0]!.readyState = 0
    sources[0]!.onerror?.(new Event('error'))
    expect(statuses).toEqual(['live', 'reconnecting'])
    expect(sources).toHaveLength(1)
  })
  it('opens a refused stream again, slower each time, and asks for the session first', async () => {
    vi.useFakeTimers()
    const { tab, sources } = browser()
    const { refused, seen } = tab()
    const refuse = () => {
      sources.at(-1)!.readyState = 2
      sources.at(-1)!.onerror?.(new Event('error'))
    }
    refuse()
    expect(refused).toHaveBeenCalledTimes(1)
    vi.advanceTimersByTime(1000)
    expect(sources).toHaveLength(2)
    expect(seen).toEqual([['resync', null]])
    refuse()
    vi.advanceTimersByTime(1000)
    expect(sources).toHaveLength(2)
    vi.advanceTimersByTime(1000)
    expect(sources).toHaveLength(3)
    vi.useRealTimers()
  })
})
