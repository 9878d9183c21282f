import type { EventType } from '#shared/events'

/** Listens while the component lives; on `resync`, too, when `again` is given. */
export function useLive(handlers: Partial<Record<EventType, (payload: LivePayload) => void>>, again?: () => void) {
  const live = useLiveStore()
  onMounted(() => {
    const leave = Object.entries(handlers).map(([type, handler]) => live.on(type as EventType, handler))
    if (again) leave.push(live.on('resync', again))
    onBeforeUnmount(() => leave.forEach(stop => stop()))
  })
}

/** Runs at most once in `milliseconds`, at the end of a burst. */
export function useCalm(work: () => unknown, milliseconds = 300) {
  let timer: ReturnType<typeof setTimeout> | undefined
  onScopeDispose(() => clearTimeout(timer))
  return () => {
    clearTimeout(timer)
    timer = setTimeout(work, milliseconds)
  }
}
