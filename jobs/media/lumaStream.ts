import type { ClipFacts } from '../../shared/measurement'
import type { PixelPipe } from './pixelPipe'

/** What the reader must know of a clip. */
export type ReadableClip = Pick<ClipFacts, 'container' | 'width' | 'height' | 'bitDepth'> & Partial<Pick<ClipFacts, 'frameCount'>>

/** Luma codes of one frame, row-major. The memory is reused: copy what must outlive the call. */
export type OnFrame = (luma: Uint8Array | Uint16Array, index: number) => void | Promise<void>

/** Memory of `frameBytes` into which a frame is to be read; at more than 8 bits its offset must be even. */
export type FrameTarget = (index: number, frameBytes: number) => Uint8Array

export const frameBytesOf = ({ width, height, bitDepth }: ReadableClip) => width * height * (bitDepth > 8 ? 2 : 1)

/** What is done with the frames of a stream of raw luma codes, counted from 0. */
export interface LumaHandler {
  /** Called once before each frame is read: the memory it goes to, `null` to drop it, `stop` to read no further. */
  begin(index: number): Uint8Array | null | 'stop' | Promise<Uint8Array | null | 'stop'>
  take: OnFrame
  /** Asked after each frame: true when no more are wanted. */
  done?(): boolean
}

/** What has come out of the decoder so far. */
export interface Assembled {
  frames: number
  bytes: number
}

/** Cut what comes through a pipe into frames. Calls `stop` when the handler wants no more, while the pipe is still open. */
export function assembleLuma(pipe: PixelPipe, stop: () => void, clip: ReadableClip, assembled: Assembled, handler: LumaHandler): Promise<void> {
  const assembler = new LumaAssembler(clip, stop, assembled, handler)
  return pipe.read(assembler.memory, assembler.filled)
}

/**
 * Lets frames be read right into the memory that the handler names for them. That memory is asked for when a frame's
 * first byte is there; until it is known, bytes are read one by one into the lead.
 */
class LumaAssembler {
  private readonly frameBytes: number
  private readonly dropped: Uint8Array
  private readonly lead = new Uint8Array(8)
  private isLeading = true
  private target: Uint8Array | undefined
  private isDropped = false
  /** Bytes in the lead or in the target. */
  private count = 0

  constructor(private readonly clip: ReadableClip, private readonly stop: () => void, private readonly assembled: Assembled, private readonly handler: LumaHandler) {
    this.frameBytes = frameBytesOf(clip)
    this.dropped = new Uint8Array(this.frameBytes)
  }

  readonly memory = (): Uint8Array => this.isLeading ? this.lead.subarray(this.count, this.count + 1) : this.target!.subarray(this.count, this.frameBytes)

  readonly filled = (bytes: number): boolean | Promise<boolean> => {
    this.assembled.bytes += bytes
    this.count += bytes
    if (!this.isLeading) return this.count < this.frameBytes || this.finish()
    if (this.target) return this.adoptLead()
    const where = this.handler.begin(this.assembled.frames)
    // While the handler makes up its mind, the lead's next byte is where reading goes on.
    return where instanceof Promise ? where.then(decided => this.accept(decided)) : this.accept(where) && this.adoptLead()
  }

  private accept(where: Uint8Array | null | 'stop'): boolean {
    if (where === 'stop') {
      this.stop()
      return false
    }
    this.isDropped = where === null
    this.target = where ?? this.dropped
    return true
  }

  private adoptLead(): boolean | Promise<boolean> {
    this.target!.set(this.lead.subarray(0, this.count))
    this.isLeading = false
    return this.count < this.frameBytes || this.finish()
  }

  private finish(): boolean | Promise<boolean> {
    const index = this.assembled.frames++
    const pending = this.isDropped ? undefined : this.handler.take(codesOf(this.target!, this.clip), index)
    this.isLeading = true
    this.target = undefined
    this.count = 0
    return pending ? pending.then(() => this.goOn()) : this.goOn()
  }

  private goOn(): boolean {
    if (!this.handler.done?.()) return true
    this.stop()
    return false
  }
}

function codesOf(bytes: Uint8Array, { bitDepth }: ReadableClip): Uint8Array | Uint16Array {
  return bitDepth > 8 ? new Uint16Array(bytes.buffer, bytes.byteOffset, bytes.length >> 1) : bytes
}

/** One frame's memory of the reader's own, for callers who bring none. */
export function ownTarget(clip: ReadableClip): FrameTarget {
  let frame: Uint8Array | undefined
  return () => frame ??= new Uint8Array(frameBytesOf(clip))
}
