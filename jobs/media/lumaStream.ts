import type { Readable } from 'node:stream'
import type { ClipFacts } from '../../shared/measurement'

/** What the reader must know of a clip. */
export type ReadableClip = Pick<ClipFacts, 'container' | 'width' | 'height' | 'bitDepth'>

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

/** Cut a stream of bytes into frames. Calls `stop` when the handler wants no more, while the stream is still open. */
export async function assembleLuma(stdout: Readable, stop: () => void, clip: ReadableClip, assembled: Assembled, { begin, take, done }: LumaHandler): Promise<void> {
  const frameBytes = frameBytesOf(clip)
  let filled = 0
  let target: Uint8Array | null = null
  for await (const chunk of stdout as AsyncIterable<Uint8Array>) {
    assembled.bytes += chunk.length
    for (let at = 0; at < chunk.length;) {
      if (filled === 0) {
        const begun = begin(assembled.frames)
        const where = begun instanceof Promise ? await begun : begun
        if (where === 'stop') return stop()
        target = where
      }
      const length = Math.min(chunk.length - at, frameBytes - filled)
      target?.set(chunk.subarray(at, at + length), filled)
      filled += length
      at += length
      if (filled < frameBytes) break
      filled = 0
      const index = assembled.frames++
      const pending = target ? take(codesOf(target, clip), index) : undefined
      if (pending) await pending
      if (done?.()) return stop()
    }
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
