import type { ClipFacts } from '../../shared/measurement'
import { readFrameRanges, type FrameRange } from '../media/frameRanges'
import type { FrameIndex } from '../media/frameIndex'
import { readFrames } from '../media/frames'
import { StageError, type StageHelpers } from './stage'

type DecodeHelpers = Pick<StageHelpers, 'signal' | 'progress' | 'log'>

/** Takes frames in ascending order: `slot` gives the memory that the frame is read into, `push` says that it is there. */
export interface FrameSink {
  slot: (frame: number) => Uint8Array
  push: (frame: number) => Promise<void> | void
}

/** Frames between two looks at the clock. */
const progressEvery = 16

/** Reports how far a decoding is, how fast it goes and how long it will take. */
function meterProgress(total: number, progress: DecodeHelpers['progress']): () => void {
  const startedAt = performance.now()
  let done = 0
  return () => {
    if (++done % progressEvery) return
    const framesPerSecond = done / (performance.now() - startedAt) * 1000
    progress({ progress: done / total, framesPerSecond, etaSeconds: (total - done) / framesPerSecond })
  }
}

/**
 * Decodes a whole clip and hands every frame on. A clip that does not give all its frames is an error: a sum over part
 * of a group would be silently wrong.
 */
export async function decodeClip(path: string, clip: ClipFacts, { signal, progress, log }: DecodeHelpers, sink: FrameSink): Promise<void> {
  const step = meterProgress(clip.frameCount, progress)
  const { frameCount, errorLines } = await readFrames(path, clip, { signal, target: (frame) => {
    if (frame >= clip.frameCount) throw new StageError('frames-differ', `The decoder gave more than the ${clip.frameCount} frames that the file lists. Export the clip again from the camera and upload it.`)
    return sink.slot(frame)
  } }, (_, frame) => {
    step()
    return sink.push(frame)
  })
  for (const line of errorLines) log(`ffmpeg: ${line}`)
  if (frameCount !== clip.frameCount) throw new StageError('frames-missing', `Only ${frameCount} of ${clip.frameCount} frames could be decoded. The file is damaged or ends early: upload it again from the card.`)
  if (errorLines.length) throw new StageError('frames-corrupt', `The decoder met damaged frames: ${errorLines[0]}. Upload the clip again from the card.`)
}

/** Decodes only some frames, bit for bit those of a whole decoding. */
export async function decodeRanges(path: string, clip: ClipFacts, index: FrameIndex, ranges: readonly FrameRange[], { signal, progress, log }: DecodeHelpers, sink: FrameSink): Promise<void> {
  const step = meterProgress(ranges.reduce((sum, range) => sum + range.frameCount, 0), progress)
  const { errorLines } = await readFrameRanges(path, clip, index, ranges, { signal, target: frame => sink.slot(frame) }, (_, frame) => {
    step()
    return sink.push(frame)
  })
  for (const line of errorLines) log(`ffmpeg: ${line}`)
}
