import type { EventType } from '#shared/events'

export interface LivePayload { id: string, campaignId?: string, [field: string]: unknown }
type Listener = (payload: LivePayload) => void

/** What happens on the server, as it happens. `resync` means: load your lists again. */
export const useLiveStore = defineStore('live', () => {
  const status = ref<LiveStatus>('connecting')
  const listeners = new Map<EventType | 'resync', Set<Listener>>()
  let channel: EventChannel | undefined

  function on(type: EventType | 'resync', listener: Listener): () => void {
    const set = listeners.get(type) ?? new Set()
    listeners.set(type, set.add(listener))
    return () => set.delete(listener)
  }
  function start(userId: string) {
    stop()
    const session = useSessionStore()
    channel = new EventChannel(`lampsum-live-${userId}`, {
      openSource: url => new EventSource(url),
      openBroadcast: 'BroadcastChannel' in window ? name => new BroadcastChannel(name) : undefined,
      locks: navigator.locks,
    }, {
      event: (type, data) => {
        const payload = (data ?? { id: '' }) as LivePayload
        for (const listener of listeners.get(type) ?? []) listener(payload)
      },
      status: next => status.value = next,
      refused: () => void session.load().catch(() => undefined),
    })
  }
  function stop() {
    channel?.leave()
    channel = undefined
    status.value = 'connecting'
  }
  return { status, on, start, stop }
})
