import type { Readable } from 'node:stream'
import type { ClipFacts } from '../../shared/measurement'
import { editListOptions, inputFile, inputLimits, runProcess } from './ffmpegProcess'
import { MediaError } from './mediaError'

/** What the reader must know of a clip. */
export type ReadableClip = Pick<ClipFacts, 'container' | 'width' | 'height' | 'bitDepth'>

export interface ReadFramesOptions {
  signal?: AbortSignal
  /** First frame to hand over, counted from 0; frames before it are decoded and dropped. */
  firstFrame?: number
  /** Frames to hand over; to the clip's end when left out. */
  frameCount?: number
  /** Decoder threads; as many as ffmpeg likes when left out. */
  threads?: number
}

export interface ReadFramesResult {
  /** Frames handed over. */
  frameCount: number
  stderrTail: string
  /** What the decoder complained about; a clean clip gives none. */
  errorLines: string[]
}

/** Luma codes of one frame, row-major. The memory is reused: copy what must outlive the call. */
export type OnFrame = (luma: Uint8Array | Uint16Array, index: number) => void | Promise<void>

/**
 * Decode a clip and hand over the raw luma codes of every decoded frame, once, in display order.
 *
 * Codes are as the stream holds them (no range conversion, no rotation, no scaling), one byte a pixel at 8 bits and
 * two at 10. An edit list in a MOV or MP4 is ignored. Frames wait while a promise that `onFrame` returned is open.
 *
 * @throws MediaError `decode-failed`, `frame-truncated`, `size-changes`; the signal's reason when aborted; what `onFrame` threw
 */
export async function readFrames(path: string, clip: ReadableClip, { signal, firstFrame = 0, frameCount = Infinity, threads }: ReadFramesOptions, onFrame: OnFrame): Promise<ReadFramesResult> {
  const frameBytes = clip.width * clip.height * (clip.bitDepth > 8 ? 2 : 1)
  const last = firstFrame + frameCount
  const progress = new ProgressCount()
  const assembled = { frames: 0, bytes: 0 }
  const { exitCode, stderrTail, errorLines } = await runProcess('ffmpeg', decodeArguments(path, clip.container, threads, last), {
    signal,
    onSide: text => progress.add(text),
    onOutput: stdout => assemble(stdout, clip, frameBytes, assembled, (luma, index) => index >= firstFrame && index < last ? onFrame(luma, index) : undefined),
  })
  if (exitCode !== 0) throw new MediaError('decode-failed', `The decoder stopped after ${assembled.frames} frames: ${errorLines.at(-1) ?? `exit code ${exitCode}`}. The file may be damaged: upload it again from the card.`, { stderrTail })
  if (progress.frames !== null && assembled.bytes !== progress.frames * frameBytes) throw new MediaError('size-changes', `The picture size changes within the clip: it is not ${clip.width}×${clip.height} throughout. Record it again with one setting.`, { stderrTail })
  if (assembled.bytes !== assembled.frames * frameBytes) throw new MediaError('frame-truncated', `The decoder ended in the middle of frame ${assembled.frames}. Upload the clip again from the card.`, { stderrTail })
  return { frameCount: Math.max(0, Math.min(assembled.frames, last) - firstFrame), stderrTail, errorLines }
}

/**
 * extractplanes hands the luma codes on untouched (`-pix_fmt gray` would rescale them). With `-autoscale 0` a change of
 * size in mid-stream shows in the byte count instead of being rescaled. Frames are numbered anew behind the filter, since
 * the writer complains about timestamps that repeat.
 */
function decodeArguments(path: string, container: string, threads: number | undefined, lastFrame: number): string[] {
  return [
    '-nostdin', '-hide_banner', '-v', 'error', '-noautorotate', ...threads === undefined ? [] : ['-threads', String(threads)],
    ...inputLimits, ...editListOptions(container), '-i', inputFile(path),
    '-map', '0:V:0', '-an', '-sn', '-dn', '-vf', 'extractplanes=y,settb=1/1000,setpts=N', '-enc_time_base', '1/1000', '-fps_mode', 'passthrough', '-autoscale', '0',
    ...Number.isFinite(lastFrame) ? ['-frames:v', String(lastFrame)] : [],
    '-progress', 'pipe:3', '-f', 'rawvideo', 'pipe:1',
  ]
}

async function assemble(stdout: Readable, { bitDepth }: ReadableClip, frameBytes: number, assembled: { frames: number, bytes: number }, onFrame: OnFrame): Promise<void> {
  const frame = new Uint8Array(frameBytes)
  const luma = bitDepth > 8 ? new Uint16Array(frame.buffer) : frame
  let filled = 0
  for await (const chunk of stdout as AsyncIterable<Uint8Array>) {
    assembled.bytes += chunk.length
    for (let at = 0; at < chunk.length;) {
      const length = Math.min(chunk.length - at, frameBytes - filled)
      frame.set(chunk.subarray(at, at + length), filled)
      filled += length
      at += length
      if (filled < frameBytes) break
      filled = 0
      const pending = onFrame(luma, assembled.frames++)
      if (pending) await pending
    }
  }
}

/** Frames that ffmpeg says it wrote, from its progress lines. */
class ProgressCount {
  frames: number | null = null
  private partial = ''
  add(text: string): void {
    const lines = (this.partial + text).split('\n')
    this.partial = lines.pop()!
    for (const line of lines) {
      const count = /^frame=\s*(\d+)/.exec(line)?.[1]
      if (count !== undefined) this.frames = Number(count)
    }
  }
}
