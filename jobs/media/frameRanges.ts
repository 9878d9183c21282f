import { frameAtTick, lastNotAbove, type FrameIndex } from './frameIndex'
import { FrameTicks, ticksFilter } from './frameTicks'
import { runProcess } from './ffmpegProcess'
import { containment, lumaArguments, sizeChanges } from './frames'
import { assembleLuma, frameBytesOf, ownTarget, type FrameTarget, type OnFrame, type ReadableClip } from './lumaStream'
import { MediaError } from './mediaError'
import { normalizeRanges, planRuns, type FrameRange } from './rangePlan'

export type { FrameRange } from './rangePlan'

export interface ReadRangesOptions {
  signal?: AbortSignal
  /** Decoder threads; two more than there are cores when left out. Results do not depend on it. */
  threads?: number
  /** Where each frame is read to, asked once a frame. */
  target?: FrameTarget
}

export interface ReadRangesResult {
  /** Frames handed over. */
  frameCount: number
  /** Runs of ffmpeg, and how many of them gave other frames than asked and were made up for by an earlier start. */
  runs: number
  failedRuns: number
  stderrTail: string
  /** What the decoder complained about where it was decoding from the clip's start; a clean clip gives none. */
  errorLines: string[]
}

/**
 * Decode only these frames of a clip and hand them over as `readFrames` would: the same codes, each frame once, ascending.
 *
 * Decoding begins at the entry before each range. Where ffmpeg's seek really led is never trusted: every frame is told
 * by its tick, frames count only from the moment an entry frame itself has come out, and from there on each must bear the
 * tick that follows. When that fails, or the decoder complains, decoding begins further in front, at last with the clip's
 * first frame, where frames are told by counting.
 *
 * @throws RangeError for frames outside the clip; MediaError `decode-failed`, `size-changes`, `frames-missing`; the
 * signal's reason when aborted; what `onFrame` threw
 */
export async function readFrameRanges(path: string, clip: ReadableClip, index: FrameIndex, ranges: readonly FrameRange[], options: ReadRangesOptions, onFrame: OnFrame): Promise<ReadRangesResult> {
  const result: ReadRangesResult = { frameCount: 0, runs: 0, failedRuns: 0, stderrTail: '', errorLines: [] }
  const source = { path, clip, index, options: { target: ownTarget(clip), ...options }, onFrame }
  for (const run of planRuns(normalizeRanges(ranges, index.ticks.length), index)) {
    let left = run.ranges
    for (const start of startsOf(run.entry, index)) {
      const { next, stderrTail, errorLines } = await decodeFrom(source, start, left)
      result.runs++
      result.stderrTail = stderrTail
      result.errorLines.push(...errorLines)
      result.frameCount += countOf(left) - countOf(after(left, next))
      left = after(left, next)
      if (!left.length) break
      result.failedRuns++
    }
    if (left.length) throw new MediaError('frames-missing', `The decoder did not give frame ${left[0].firstFrame}. The file is damaged or ends early: upload it again from the card.`, { stderrTail: result.stderrTail })
  }
  return result
}

interface Source {
  path: string
  clip: ReadableClip
  index: FrameIndex
  options: ReadRangesOptions & { target: FrameTarget }
  onFrame: OnFrame
}

/** Where to begin: the frame whose coming out makes the stream trusted, and the tick to seek to; null is the clip's start. */
type Start = { entryFrame: number, tick: number } | null

/** Further and further in front; a container that cannot find its way by decoding times is asked for a second earlier. */
function startsOf(entry: number, { entryFrames, ticks, timeBase, needsRunUp }: FrameIndex): Start[] {
  const second = timeBase.denominator / timeBase.numerator
  const at = (from: number, marginTicks: number): Start[] => from < 0 || entry < 0 ? [] : [{ entryFrame: entryFrames[entry], tick: ticks[entryFrames[from]] - marginTicks }]
  const direct = needsRunUp ? at(entry - 1, 0) : at(entry, 0)
  return [...direct, ...direct.length ? at(Math.max(0, entry - 1), second) : [], null]
}

const countOf = (ranges: readonly FrameRange[]) => ranges.reduce((sum, { frameCount }) => sum + frameCount, 0)

/** What is left of the ranges from frame `next` on. */
function after(ranges: readonly FrameRange[], next: number): FrameRange[] {
  return ranges.flatMap(({ firstFrame, frameCount }) => {
    const first = Math.max(firstFrame, next)
    return first < firstFrame + frameCount ? [{ firstFrame: first, frameCount: firstFrame + frameCount - first }] : []
  })
}

/** One run of ffmpeg. `next` is the first frame it did not reach in a way to be trusted. */
async function decodeFrom({ path, clip, index, options, onFrame }: Source, start: Start, ranges: readonly FrameRange[]): Promise<{ next: number, stderrTail: string, errorLines: string[] }> {
  const frameTicks = new FrameTicks()
  const judge = new FrameJudge(index, start)
  const last = ranges.at(-1)!.firstFrame + ranges.at(-1)!.frameCount
  let reached = 0
  const firstFrames = ranges.map(({ firstFrame }) => firstFrame)
  const wanted = (frame: number) => {
    const range = ranges[lastNotAbove(firstFrames, frame)]
    return range !== undefined && frame < range.firstFrame + range.frameCount
  }
  const begin = async (output: number) => {
    const tick = await frameTicks.of(output)
    // What the decoder complained about before this frame came out is on standard error by now: let it be read.
    await new Promise(settle => setImmediate(settle))
    if (frameTicks.restarted) throw sizeChanges(clip)
    const frame = judge.frameOf(output, tick)
    if (frame === 'lost' || frame >= last) return 'stop'
    return wanted(frame) ? options.target(frame, frameBytesOf(clip)) : null
  }
  const { exitCode, stderrTail, errorLines, stopped } = await runProcess('ffmpeg', rangeArguments(path, clip, index, options.threads, start), {
    signal: options.signal, ...containment(clip, options.threads),
    onSide: frameTicks.add,
    onSideEnd: frameTicks.end,
    onErrorLine: judge.complain,
    onPixels: (pipe, stop) => assembleLuma(pipe, stop, clip, { frames: 0, bytes: 0 }, {
      begin,
      take: async (luma) => {
        await onFrame(luma, judge.next - 1)
        reached = judge.next
      },
      done: () => reached >= last,
    }),
  })
  if (!stopped && exitCode !== 0 && start === null) throw new MediaError('decode-failed', `The decoder stopped after ${judge.next} frames: ${errorLines.at(-1) ?? `exit code ${exitCode}`}. The file may be damaged: upload it again from the card.`, { stderrTail })
  return { next: reached, stderrTail, errorLines: start === null ? errorLines : [] }
}

function rangeArguments(path: string, clip: ReadableClip, { timeBase }: FrameIndex, threads: number | undefined, start: Start): string[] {
  // ffmpeg takes whole microseconds, which must not fall short of the key frame.
  const seekSeconds = start && Math.ceil(1e6 * start.tick * timeBase.numerator / timeBase.denominator) / 1e6
  return lumaArguments(path, clip.container, {
    threads, filters: [ticksFilter],
    input: ['-copyts', ...seekSeconds === null ? [] : ['-noaccurate_seek', '-seek_timestamp', '1', '-ss', seekSeconds.toFixed(6)]],
  })
}

/** Tells which frame comes out of the decoder, and stops trusting it at the first doubt. */
class FrameJudge {
  /** The frame that must come next; before the entry has come out, the entry. */
  next: number
  private trusted: boolean
  private complaints = false

  constructor(private readonly index: FrameIndex, private readonly start: Start) {
    this.next = start?.entryFrame ?? 0
    this.trusted = start === null
  }

  readonly complain = (): void => {
    // At the clip's start complaints are the clip's own; before the entry they are about frames that do not count.
    if (this.start && this.trusted) this.complaints = true
  }

  /** The display number of the frame that came out as `output`, −1 for one that does not count yet. */
  frameOf(output: number, tick: number | undefined): number | 'lost' {
    if (this.start === null) return (this.next = output + 1) - 1
    if (this.complaints || tick === undefined || Number.isNaN(tick)) return 'lost'
    const frame = frameAtTick(this.index, tick)
    if (!this.trusted && frame !== this.start.entryFrame) return frame > this.start.entryFrame ? 'lost' : -1
    this.trusted = true
    if (tick !== this.index.ticks[this.next]) return 'lost'
    return this.next++
  }
}
