import type { ServerResponse } from 'node:http'
import type { Caller } from './session'

/** With this much waiting a reader gets nothing more until it has taken that. */
const fullBufferBytes = 64 * 1024
/** Nothing here writes so far ahead; if something does, the reader is dropped and comes back with its cursor. */
export const largestBufferBytes = 256 * 1024
export const longestStallMs = 20_000

/** One open stream. What it has been sent is `position`; whoever writes looks at `full` first. */
export class StreamClient {
  position = 0
  /** Live clients get events as they are read; the others are catching up from the database. */
  live = false
  closed = false
  readonly gone: Promise<void>
  private blockedSince: number | null = null

  constructor(readonly response: ServerResponse, readonly caller: Caller, private readonly now: () => number = Date.now) {
    this.closed = response.closed
    this.gone = new Promise((resolve) => {
      if (response.closed) return resolve()
      response.once('close', () => {
        this.closed = true
        resolve()
      })
    })
    response.on('drain', () => {
      this.blockedSince = null
    })
    // A broken pipe also ends in 'close'.
    response.on('error', () => {})
  }

  get full(): boolean {
    return !this.closed && this.response.writableLength >= fullBufferBytes
  }

  /** Resolves when there is room again, or nobody is left to write to. */
  async drained(): Promise<void> {
    if (!this.full) return
    await new Promise<void>((resolve) => {
      this.response.once('drain', resolve)
      void this.gone.then(resolve)
    })
  }

  get stalled(): boolean {
    return this.blockedSince !== null && this.now() - this.blockedSince > longestStallMs
  }

  send(chunk: string | Buffer): void {
    if (this.closed) return
    if (!this.response.write(chunk)) this.blockedSince ??= this.now()
    if (this.response.writableLength > largestBufferBytes) this.drop()
  }

  /** Ends the stream in good order; the browser will ask again and hear why, if it may not. */
  close(): void {
    if (this.closed) return
    if (this.full) return this.drop()
    this.closed = true
    this.response.end()
  }

  drop(): void {
    this.closed = true
    this.response.destroy()
  }
}
