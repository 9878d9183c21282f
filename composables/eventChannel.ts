import { eventTypes, resyncEvent, type EventType } from '#shared/events'

export type LiveType = EventType | typeof resyncEvent
export type LiveStatus = 'connecting' | 'live' | 'reconnecting'
interface EventMessage { kind: 'event', id: string, type: LiveType, data: unknown }
type Message = EventMessage | { kind: 'status', status: LiveStatus } | { kind: 'hello' }

export interface SourceLike {
  readyState: number
  onopen: ((event: Event) => void) | null
  onerror: ((event: Event) => void) | null
  addEventListener: (type: string, listener: (event: MessageEvent) => void) => void
  close: () => void
}
export interface BroadcastLike {
  onmessage: ((event: MessageEvent) => void) | null
  postMessage: (message: unknown) => void
  close: () => void
}
export interface ChannelTools {
  openSource: (url: string) => SourceLike
  openBroadcast?: (name: string) => BroadcastLike
  locks?: Pick<LockManager, 'request'>
}
export interface ChannelListener {
  event: (type: LiveType, data: unknown) => void
  status: (status: LiveStatus) => void
  /** The server refused the stream; ask who is signed in before trying again. */
  refused: () => void
}

const closed = 2
const reopenSeconds = [1, 2, 5, 10, 30]

/**
 * One stream per browser: the tab that holds the lock reads the stream and tells the others; when it goes, the next
 * in line takes over, and everybody loads again, because something may have happened in between. Without locks or
 * broadcast every tab reads its own. Returns a function that leaves.
 */
export function openEventChannel(name: string, tools: ChannelTools, listener: ChannelListener): () => void {
  const leaving = new AbortController()
  let broadcast: BroadcastLike | undefined
  let source: SourceLike | undefined
  let status: LiveStatus = 'connecting'
  let lastId = ''
  let failures = 0
  let timer: ReturnType<typeof setTimeout> | undefined

  const tell = (message: Message) => broadcast?.postMessage(message)
  function setStatus(next: LiveStatus) {
    status = next
    listener.status(next)
    if (source) tell({ kind: 'status', status: next })
  }
  function deliver(message: EventMessage) {
    if (message.id) lastId = message.id
    listener.event(message.type, message.data)
  }
  function open() {
    const opened = source = tools.openSource(lastId ? `/api/events?lastEventId=${encodeURIComponent(lastId)}` : '/api/events')
    opened.onopen = () => {
      failures = 0
      setStatus('live')
    }
    opened.onerror = () => {
      setStatus('reconnecting')
      if (opened.readyState === closed) reopen()
    }
    for (const type of [...eventTypes, resyncEvent] as LiveType[]) {
      opened.addEventListener(type, (event) => {
        const message: EventMessage = { kind: 'event', id: event.lastEventId, type, data: parse(event.data) }
        deliver(message)
        tell(message)
      })
    }
  }
  function reopen() {
    if (leaving.signal.aborted) return
    const seconds = reopenSeconds[Math.min(failures++, reopenSeconds.length - 1)]!
    listener.refused()
    timer = setTimeout(() => {
      open()
      announceGap()
    }, seconds * 1000)
  }
  function announceGap() {
    const message: EventMessage = { kind: 'event', id: '', type: resyncEvent, data: null }
    deliver(message)
    tell(message)
  }
  function lead() {
    const takesOver = status !== 'connecting'
    open()
    if (takesOver) announceGap()
  }

  if (tools.locks && tools.openBroadcast) {
    broadcast = tools.openBroadcast(name)
    broadcast.onmessage = ({ data }: MessageEvent<Message>) => {
      if (data.kind === 'hello') tell({ kind: 'status', status })
      else if (source) return
      else if (data.kind === 'status') setStatus(data.status)
      else deliver(data)
    }
    tell({ kind: 'hello' })
    tools.locks.request(name, { signal: leaving.signal }, () => {
      lead()
      return new Promise<void>(release => leaving.signal.addEventListener('abort', () => release(), { once: true }))
    }).catch((cause: unknown) => {
      if (!leaving.signal.aborted) throw cause
    })
  } else {
    lead()
  }

  return () => {
    leaving.abort()
    clearTimeout(timer)
    source?.close()
    broadcast?.close()
  }
}

function parse(text: string): unknown {
  try {
    return JSON.parse(text)
  } catch {
    return null
  }
}
