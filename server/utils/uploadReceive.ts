import { open, type FileHandle } from 'node:fs/promises'
import type { Readable } from 'node:stream'
import { ERRORS } from '@tus/server'

/** Chunks of the network are small; one write for so many bytes keeps up with a disk. */
const writeBytes = 1 << 20

export interface ReceiveOptions {
  path: string
  offset: number
  /** No more than this may come. */
  limit: number
  /** Stops in good order: what has arrived is kept. */
  signal: AbortSignal
  /** Called after each write with the file's new length. */
  onWritten?: (length: number) => void
}

/**
 * Writes the body of a request to the end of a file, straight from Node's request: the stock way through a web
 * stream and three more costs a third of the speed. Answers the file's new length.
 * @throws what tus answers with: aborted, too much, or the file system's error
 */
export async function receiveBody(body: Readable, { path, offset, limit, signal, onWritten }: ReceiveOptions): Promise<number> {
  const file = await open(path, 'r+')
  try {
    return await new Receiver(file, offset, onWritten).run(body, limit, signal)
  } finally {
    await file.close()
  }
}

class Receiver {
  private waiting: Buffer[] = []
  private waitingBytes = 0
  /** The write under way, while the next bytes are gathered. */
  private writing: Promise<void> = Promise.resolve()
  private arrived: number

  constructor(private readonly file: FileHandle, private length: number, private readonly onWritten?: (length: number) => void) {
    this.arrived = length
  }

  async run(body: Readable, limit: number, signal: AbortSignal): Promise<number> {
    const end = this.arrived + limit
    let failure: unknown
    try {
      for await (const chunk of untilAborted(body, signal)) {
        if (this.arrived + chunk.length > end) throw ERRORS.ERR_SIZE_EXCEEDED
        this.arrived += chunk.length
        this.waiting.push(chunk)
        this.waitingBytes += chunk.length
        if (this.waitingBytes >= writeBytes) await this.flush()
      }
    } catch (error) {
      failure = error
    }
    // What came before the connection broke is kept; of a body that is too long nothing more is.
    if (failure !== ERRORS.ERR_SIZE_EXCEEDED) await this.flush()
    await this.writing
    if (failure) throw failure
    return this.length
  }

  /** Starts the next write as soon as the one before is done. */
  private async flush(): Promise<void> {
    await this.writing
    const buffers = this.waiting
    this.waiting = []
    this.waitingBytes = 0
    this.writing = this.write(buffers)
    // Whoever waits for it next hears of its failure.
    this.writing.catch(() => {})
  }

  private async write(buffers: Buffer[]): Promise<void> {
    while (buffers.length) {
      const { bytesWritten } = await this.file.writev(buffers, this.length)
      this.length += bytesWritten
      buffers = dropBytes(buffers, bytesWritten)
    }
    this.onWritten?.(this.length)
  }
}

/** What a write left over; a full disk writes a part first and fails at the next. */
function dropBytes(buffers: Buffer[], count: number): Buffer[] {
  const rest = [...buffers]
  while (rest.length && count >= rest[0]!.length) count -= rest.shift()!.length
  if (count) rest[0] = rest[0]!.subarray(count)
  return rest
}

/** The body's chunks until it ends or the signal asks to stop. The request itself stays alive: it still has to be answered. */
async function* untilAborted(body: Readable, signal: AbortSignal): AsyncGenerator<Buffer> {
  let wake = () => {}
  const onEvent = () => wake()
  for (const name of ['readable', 'end', 'close', 'error']) body.on(name, onEvent)
  signal.addEventListener('abort', onEvent)
  try {
    while (!signal.aborted) {
      const chunk = body.read() as Buffer | null
      if (chunk) {
        yield chunk
        continue
      }
      if (body.readableEnded) return
      if (body.errored || body.destroyed) throw ERRORS.ABORTED
      await new Promise<void>((resolve) => {
        wake = resolve
        if (signal.aborted || body.readableEnded || body.destroyed || body.readableLength) resolve()
      })
    }
  } finally {
    for (const name of ['readable', 'end', 'close', 'error']) body.off(name, onEvent)
    signal.removeEventListener('abort', onEvent)
  }
}
