import { availableParallelism } from 'node:os'
import { editListOptions, inputFile, inputLimits, runProcess } from './ffmpegProcess'
import { FrameTicks, ticksFilter } from './frameTicks'
import { assembleLuma, frameBytesOf, ownTarget, type FrameTarget, type OnFrame, type ReadableClip } from './lumaStream'
import { MediaError } from './mediaError'
import { decodeLimits } from './processLimits'

export type { FrameTarget, OnFrame, ReadableClip } from './lumaStream'

export interface ReadFramesOptions {
  signal?: AbortSignal
  /** First frame to hand over, counted from 0; frames before it are decoded and dropped. */
  firstFrame?: number
  /** Frames to hand over; to the clip's end when left out. */
  frameCount?: number
  /** Decoder threads; two more than there are cores when left out. Results do not depend on it. */
  threads?: number
  /** Where each frame is read to, asked once a frame: saves a copy when that is a kernel's own memory. */
  target?: FrameTarget
}

export interface ReadFramesResult {
  /** Frames handed over. */
  frameCount: number
  stderrTail: string
  /** What the decoder complained about; a clean clip gives none. */
  errorLines: string[]
}

/**
 * Decode a clip and hand over the raw luma codes of every decoded frame, once, in display order.
 *
 * Codes are as the stream holds them (no range conversion, no rotation, no scaling), one byte a pixel at 8 bits and
 * two at 10. An edit list in a MOV or MP4 is ignored. Frames wait while a promise that `onFrame` returned is open.
 *
 * @throws MediaError `decode-failed`, `frame-truncated`, `size-changes`; the signal's reason when aborted; what `onFrame` threw
 */
export async function readFrames(path: string, clip: ReadableClip, { signal, firstFrame = 0, frameCount = Infinity, threads, target = ownTarget(clip) }: ReadFramesOptions, onFrame: OnFrame): Promise<ReadFramesResult> {
  const frameBytes = frameBytesOf(clip)
  const last = firstFrame + frameCount
  const progress = new ProgressCount()
  const ticks = new FrameTicks()
  const assembled = { frames: 0, bytes: 0 }
  const { exitCode, stderrTail, errorLines } = await runProcess('ffmpeg', decodeArguments(path, clip.container, threads, last), {
    signal, ...containment(clip, threads),
    onSide(text) {
      progress.add(text)
      ticks.add(text)
    },
    onPixels: (pipe, stop) => assembleLuma(pipe, stop, clip, assembled, {
      begin: (index) => {
        if (ticks.restarted) throw sizeChanges(clip)
        return index >= firstFrame && index < last ? target(index, frameBytes) : null
      },
      take: onFrame,
    }),
  })
  if (exitCode !== 0) throw new MediaError('decode-failed', `The decoder stopped after ${assembled.frames} frames: ${errorLines.at(-1) ?? `exit code ${exitCode}`}. The file may be damaged: upload it again from the card.`, { stderrTail })
  if (ticks.restarted || (progress.frames !== null && assembled.bytes !== progress.frames * frameBytes)) throw sizeChanges(clip, stderrTail)
  if (assembled.bytes !== assembled.frames * frameBytes) throw new MediaError('frame-truncated', `The decoder ended in the middle of frame ${assembled.frames}. Upload the clip again from the card.`, { stderrTail })
  return { frameCount: Math.max(0, Math.min(assembled.frames, last) - firstFrame), stderrTail, errorLines }
}

export const sizeChanges = ({ width, height }: ReadableClip, stderrTail = '') => new MediaError('size-changes', `The picture size changes within the clip: it is not ${width}×${height} throughout. Record it again with one setting.`, { stderrTail })

/** What a decoder may use and how long it may be silent. */
export const containment = (clip: ReadableClip, threads = defaultThreads()) => ({ limits: decodeLimits(clip, threads), idleSeconds: 120 })

/** More frames in the making than ffmpeg would choose: cores stay busy while a finished frame waits to be taken. */
const defaultThreads = () => Math.min(16, availableParallelism() + 4)

/**
 * Options in front of the input, and the output's. extractplanes hands the luma codes on untouched (`-pix_fmt gray` would
 * rescale them). With `-autoscale 0` a change of size in mid-stream shows in the byte count instead of being rescaled.
 * Frames are numbered anew behind the filter, since the writer complains about timestamps that repeat.
 */
export function lumaArguments(path: string, container: string, { threads, input = [], filters = [], output = [] }: { threads?: number, input?: string[], filters?: string[], output?: string[] }): string[] {
  return [
    '-nostdin', '-hide_banner', '-v', 'error', '-noautorotate', '-threads', String(threads ?? defaultThreads()),
    ...inputLimits, ...editListOptions(container), ...input, '-i', inputFile(path),
    '-map', '0:V:0', '-an', '-sn', '-dn', '-vf', ['extractplanes=y', ...filters, 'settb=1/1000', 'setpts=N'].join(','), '-enc_time_base', '1/1000', '-fps_mode', 'passthrough', '-autoscale', '0',
    ...output, '-f', 'rawvideo', 'pipe:1',
  ]
}

function decodeArguments(path: string, container: string, threads: number | undefined, lastFrame: number): string[] {
  return lumaArguments(path, container, { threads, filters: [ticksFilter], output: [...Number.isFinite(lastFrame) ? ['-frames:v', String(lastFrame)] : [], '-progress', 'pipe:3'] })
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
