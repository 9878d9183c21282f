import { ERRORS, type Lock, type Locker, type RequestRelease } from '@tus/server'

interface Holder {
  requestRelease: RequestRelease
}

interface Waiting {
  holder: Holder
  enter: () => void
}

/**
 * One request at a time for each upload. Who comes later asks the holder to stop and waits in line; the stock
 * locker does that in a loop that keeps a core busy.
 */
export class UploadLocker implements Locker {
  private readonly holders = new Map<string, Holder>()
  private readonly lines = new Map<string, Waiting[]>()

  constructor(private readonly patienceMs = 15_000) {}

  newLock(id: string): Lock {
    let mine: Holder | undefined
    return {
      lock: async (signal, requestRelease) => {
        const holder = { requestRelease }
        await this.enter(id, holder, signal)
        mine = holder
      },
      unlock: async () => {
        if (mine && this.holders.get(id) === mine) this.next(id)
        mine = undefined
      },
    }
  }

  private enter(id: string, holder: Holder, signal: AbortSignal): Promise<void> {
    const present = this.holders.get(id)
    if (!present) {
      this.holders.set(id, holder)
      return Promise.resolve()
    }
    return new Promise((resolve, reject) => {
      const line = this.lines.get(id) ?? []
      this.lines.set(id, line)
      const leave = (error: unknown) => {
        clearTimeout(timer)
        signal.removeEventListener('abort', onAbort)
        const index = line.findIndex(waiting => waiting.holder === holder)
        if (index >= 0) line.splice(index, 1)
        if (error) reject(error as Error)
        else resolve()
      }
      const onAbort = () => leave(ERRORS.ABORTED)
      const timer = setTimeout(() => leave(lockedError), this.patienceMs)
      signal.addEventListener('abort', onAbort)
      line.push({ holder, enter: () => leave(null) })
      void present.requestRelease()
    })
  }

  private next(id: string): void {
    const waiting = this.lines.get(id)?.[0]
    if (!waiting) {
      this.holders.delete(id)
      this.lines.delete(id)
      return
    }
    this.holders.set(id, waiting.holder)
    waiting.enter()
    // Others are in line behind it already.
    if (this.lines.get(id)?.length) void waiting.holder.requestRelease()
  }
}

/** tus clients wait and ask again when they see 423. */
export const lockedError = { status_code: 423, body: 'Another request still works on this upload. Ask again in a moment.' }
