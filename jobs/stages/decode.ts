import type { ClipFacts } from '../../shared/measurement'
import { readFrames } from '../media/frames'
import { StageError, type StageHelpers } from './stage'

/** Frames between two looks at the clock. */
const progressEvery = 16

/**
 * Decodes a whole clip and hands every frame on, with progress, speed and time left. A clip that does not give all
 * its frames is an error: a sum over part of a group would be silently wrong.
 */
export async function decodeClip(path: string, clip: ClipFacts, { signal, progress, log }: Pick<StageHelpers, 'signal' | 'progress' | 'log'>, onFrame: (luma: Uint8Array | Uint16Array, index: number) => void | Promise<void>): Promise<number> {
  const startedAt = performance.now()
  const { frameCount, errorLines } = await readFrames(path, clip, { signal }, (luma, index) => {
    if (index >= clip.frameCount) throw new StageError('frames-differ', `The decoder gave more than the ${clip.frameCount} frames that the file lists. Export the clip again from the camera and upload it.`)
    if (index % progressEvery === 0 && index) {
      const framesPerSecond = index / (performance.now() - startedAt) * 1000
      progress({ progress: index / clip.frameCount, framesPerSecond, etaSeconds: (clip.frameCount - index) / framesPerSecond })
    }
    return onFrame(luma, index)
  })
  for (const line of errorLines) log(`ffmpeg: ${line}`)
  if (frameCount !== clip.frameCount) throw new StageError('frames-missing', `Only ${frameCount} of ${clip.frameCount} frames could be decoded. The file is damaged or ends early: upload it again from the card.`)
  if (errorLines.length) throw new StageError('frames-corrupt', `The decoder met damaged frames: ${errorLines[0]}. Upload the clip again from the card.`)
  return frameCount
}
