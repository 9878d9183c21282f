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
 * broadcast every tab reads its own.
 */
export class EventChannel {
  private readonly leaving = new AbortController()
  private broadcast?: BroadcastLike
  private source?: SourceLike
  private status: LiveStatus = 'connecting'
  private lastId = ''
  private failures = 0
  private timer?: ReturnType<typeof setTimeout>

  constructor(private readonly name: string, private readonly tools: ChannelTools, private readonly listener: ChannelListener) {
    if (tools.locks && tools.openBroadcast) this.join(tools.locks, tools.openBroadcast)
    else this.lead()
  }

  leave() {
    this.leaving.abort()
    clearTimeout(this.timer)
    this.source?.close()
    this.broadcast?.close()
  }

  private join(locks: NonNullable<ChannelTools['locks']>, openBroadcast: NonNullable<ChannelTools['openBroadcast']>) {
    this.broadcast = openBroadcast(this.name)
    this.broadcast.onmessage = ({ data }: MessageEvent<Message>) => this.hear(data)
    this.tell({ kind: 'hello' })
    locks.request(this.name, { signal: this.leaving.signal }, () => {
      this.lead()
      return new Promise<void>(release => this.leaving.signal.addEventListener('abort', () => release(), { once: true }))
    }).catch((cause: unknown) => {
      if (!this.leaving.signal.aborted) throw cause
    })
  }

  private lead() {
    const takesOver = this.status !== 'connecting'
    this.open()
    if (takesOver) this.announceGap()
  }

  private open() {
    const opened = this.source = this.tools.openSource(this.lastId ? `/api/events?lastEventId=${encodeURIComponent(this.lastId)}` : '/api/events')
    opened.onopen = () => {
      this.failures = 0
      this.setStatus('live')
    }
    opened.onerror = () => {
      this.setStatus('reconnecting')
      if (opened.readyState === closed) this.reopen()
    }
    for (const type of [...eventTypes, resyncEvent] as LiveType[]) {
      opened.addEventListener(type, event => this.pass({ kind: 'event', id: event.lastEventId, type, data: parse(event.data) }))
    }
  }

  /** The browser gives up for good when the server answers anything but a stream; then we try again, ever slower. */
  private reopen() {
    if (this.leaving.signal.aborted) return
    const seconds = reopenSeconds[Math.min(this.failures++, reopenSeconds.length - 1)]!
    this.listener.refused()
    this.timer = setTimeout(() => {
      this.open()
      this.announceGap()
    }, seconds * 1000)
  }

  private announceGap() {
    this.pass({ kind: 'event', id: '', type: resyncEvent, data: null })
  }

  private pass(message: EventMessage) {
    this.deliver(message)
    this.tell(message)
  }

  private deliver(message: EventMessage) {
    if (message.id) this.lastId = message.id
    this.listener.event(message.type, message.data)
  }

  private setStatus(next: LiveStatus) {
    this.status = next
    this.listener.status(next)
    if (this.source) this.tell({ kind: 'status', status: next })
  }

  private hear(message: Message) {
    if (this.source) {
      if (message.kind === 'hello') this.tell({ kind: 'status', status: this.status })
    } else if (message.kind === 'status') {
      this.setStatus(message.status)
    } else if (message.kind === 'event') {
      this.deliver(message)
    }
  }

  private tell(message: Message) {
    this.broadcast?.postMessage(message)
  }
}

function parse(text: string): unknown {
  try {
    return JSON.parse(text)
  } catch {
    return null
  }
}
