import { frameAtTick, type FrameIndex } from './frameIndex'
import { readFrameRanges, type ReadRangesOptions, type ReadRangesResult } from './frameRanges'
import { FrameTicks, ticksFilter } from './frameTicks'
import { runProcess } from './ffmpegProcess'
import { containment, lumaArguments } from './frames'
import { assembleLuma, frameBytesOf, ownTarget, type OnFrame, type ReadableClip } from './lumaStream'

/**
 * Decode only the frames at which decoding can begin (`index.entryFrames`) and hand them over with their numbers, in
 * display order and with the codes that `readFrames` gives. An index without entries gives no frames.
 *
 * Frames are told by their ticks; those that did not come out in order are decoded as ranges afterwards, so the numbers
 * may then jump back once.
 *
 * @throws as `readFrameRanges`
 */
export async function readKeyFrames(path: string, clip: ReadableClip, index: FrameIndex, options: ReadRangesOptions, onFrame: OnFrame): Promise<ReadRangesResult> {
  const ticks = new FrameTicks()
  const entries = new Set(index.entryFrames)
  const missing = new Set(entries)
  if (!missing.size) return { frameCount: 0, runs: 0, failedRuns: 0, stderrTail: '', errorLines: [] }
  const { target = ownTarget(clip), signal, threads } = options
  let frame = -1
  let complaints = 0
  const { stderrTail } = await runProcess('ffmpeg', lumaArguments(path, clip.container, { threads, filters: [ticksFilter], input: ['-copyts', '-skip_frame', 'nokey'] }), {
    signal, ...containment(clip, threads),
    onSide: ticks.add,
    onSideEnd: ticks.end,
    onErrorLine: () => void complaints++,
    onPixels: (pipe, stop) => assembleLuma(pipe, stop, clip, { frames: 0, bytes: 0 }, {
      async begin(output) {
        const tick = await ticks.of(output)
        await new Promise(settle => setImmediate(settle))
        if (complaints || ticks.restarted || tick === undefined) return 'stop'
        frame = frameAtTick(index, tick)
        return missing.has(frame) ? target(frame, frameBytesOf(clip)) : null
      },
      async take(luma) {
        await onFrame(luma, frame)
        missing.delete(frame)
      },
    }),
  })
  const found = entries.size - missing.size
  if (!missing.size) return { frameCount: found, runs: 1, failedRuns: 0, stderrTail, errorLines: [] }
  const rest = await readFrameRanges(path, clip, index, [...missing].map(firstFrame => ({ firstFrame, frameCount: 1 })), options, onFrame)
  return { ...rest, frameCount: found + rest.frameCount, runs: rest.runs + 1, failedRuns: rest.failedRuns + 1 }
}
