import { alignClip, type AlignInput, type AlignResult } from '../signal/align'
import { planMoreWindows } from '../signal/glanceMore'
import { emptyLight, timingLight } from './lightFile'
import { measureWindows } from './measureWindows'
import type { StageHelpers } from './stage'
import type { ClipSource } from './sumFiles'

/** Enough for a start: the sum stage aligns anew with every frame and corrects what follows, so a wrong start costs time only. */
export const glanceSuffices = 0.2
const mostLooks = 3

/** Aligns by the light of some frames; while that leaves several alignments open, looks again where they differ. */
export async function alignByGlances(source: ClipSource, input: AlignInput, helpers: StageHelpers): Promise<AlignResult> {
  const frameLight = input.frameLight.slice()
  let result = alignClip({ ...input, frameLight })
  for (let look = 1; look <= mostLooks && result.confidence < glanceSuffices; look++) {
    const { windows } = planMoreWindows({ ...input, frameLight, keyFrames: source.index.entryFrames }, result)
    if (!windows.length) break
    const measured = emptyLight(frameLight.length, source.lampPatch !== null)
    await measureWindows(source, windows, measured, helpers)
    timingLight(measured).forEach((value, frame) => {
      if (Number.isFinite(value)) frameLight[frame] = value
    })
    result = alignClip({ ...input, frameLight })
  }
  return result
}
