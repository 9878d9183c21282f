import { LampsumError } from '#shared/errors'

export interface RateLimit {
  attempts: number
  windowMs: number
  /** Keys remembered at most; the oldest go first. */
  keys?: number
  now?: () => number
}

export interface RateLimiter {
  /** Counts an attempt; throws LampsumError('too-many-attempts') when the window holds too many already. */
  count: (key: string) => void
  /** Forgets a key, after a success. */
  forget: (key: string) => void
}

/** Attempts by key in a sliding window, in this process's memory. An attempt that is refused does not prolong the wait. */
export function createRateLimiter({ attempts, windowMs, keys = 10_000, now = Date.now }: RateLimit): RateLimiter {
  const times = new Map<string, number[]>()
  return {
    count(key) {
      const recent = (times.get(key) ?? []).filter(time => time > now() - windowMs)
      if (recent.length >= attempts) throw new LampsumError('too-many-attempts')
      times.delete(key)
      times.set(key, [...recent, now()])
      if (times.size > keys) times.delete(times.keys().next().value!)
    },
    forget: key => void times.delete(key),
  }
}
