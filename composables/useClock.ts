/**
 * Times in the reader's own zone. The zone is remembered in a cookie so that the server writes the same text as the
 * browser; on a first visit the page says UTC until the browser has told.
 */
export function useTimeZone() {
  const cookie = useCookie<string>('lampsum-zone', { maxAge: 60 * 60 * 24 * 365, sameSite: 'lax' })
  const zone = useState('time-zone', () => cookie.value || 'UTC')
  onMounted(() => {
    const own = Intl.DateTimeFormat().resolvedOptions().timeZone
    if (own && own !== zone.value) zone.value = cookie.value = own
  })
  return zone
}

/** Seconds since 1970, ticking while somebody looks. Starts equal on server and client. */
export function useNow(everySeconds = 1) {
  const now = useState('now', () => Date.now())
  onMounted(() => {
    now.value = Date.now()
    const timer = setInterval(() => now.value = Date.now(), everySeconds * 1000)
    onBeforeUnmount(() => clearInterval(timer))
  })
  return now
}

/** 14:05 today, 3 Mar 14:05 this year, 3 Mar 2024 before. */
export function formatTime(iso: string | null | undefined, zone: string, now: number): string {
  if (!iso) return '–'
  const time = new Date(iso)
  const part = (options: Intl.DateTimeFormatOptions, of: Date | number = time) => {
    try {
      return new Intl.DateTimeFormat('en-GB', { timeZone: zone, ...options }).format(of)
    } catch {
      return new Intl.DateTimeFormat('en-GB', { timeZone: 'UTC', ...options }).format(of)
    }
  }
  const clock = part({ hour: '2-digit', minute: '2-digit' })
  const day: Intl.DateTimeFormatOptions = { day: 'numeric', month: 'short', year: 'numeric' }
  if (part(day) === part(day, now)) return clock
  if (part({ year: 'numeric' }) === part({ year: 'numeric' }, now)) return `${part({ day: 'numeric', month: 'short' })} ${clock}`
  return part(day)
}

/** 2 s ago, 5 min ago. */
export function formatAgo(iso: string | null | undefined, now: number): string {
  if (!iso) return 'never'
  const seconds = Math.max(0, (now - Date.parse(iso)) / 1000)
  return seconds < 1.5 ? 'just now' : `${formatDuration(seconds)} ago`
}
