import type { Database } from '../db/client'
import { noteProgress } from './uploadState'

const everyMs = 1000

/** Writes how far an upload is, at most once a second and never two at once. A miss is made up for by the next. */
export function trackProgress(database: () => Database, id: string) {
  let length: number | null = null
  let writing: Promise<void> | null = null
  let lastAt = 0
  let ended = false
  const write = () => {
    if (length === null || writing) return
    const now = length
    length = null
    lastAt = Date.now()
    writing = noteProgress(database(), id, now).catch(() => {}).finally(() => {
      writing = null
      if (ended) write()
    })
  }
  return {
    note(newLength: number) {
      length = newLength
      if (Date.now() - lastAt >= everyMs) write()
    },
    /** Writes the last length too, however soon after the one before. */
    end() {
      ended = true
      write()
    },
  }
}
