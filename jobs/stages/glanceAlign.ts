import { alignClip, type AlignInput, type AlignResult } from '../signal/align'
import { planMoreWindows } from '../signal/glanceMore'
import { decodeRanges } from './decode'
import { emptyLight, timingLight } from './lightFile'
import type { StageHelpers } from './stage'
import { lightSink, type ClipSource } from './sumFiles'

/** Enough for a start: the sum stage aligns anew with every frame and corrects what follows, so a wrong start costs time only. */
export const glanceSuffices = 0.3
const mostLooks = 3

/** Aligns by the light of some frames; while that leaves several alignments open, looks again where they differ. */
export async function alignByGlances(source: ClipSource, input: AlignInput, helpers: StageHelpers): Promise<AlignResult> {
  const frameLight = input.frameLight.slice()
  let result = alignClip({ ...input, frameLight })
  for (let look = 1; look <= mostLooks && result.confidence < glanceSuffices; look++) {
    const { windows } = planMoreWindows({ ...input, frameLight, keyFrames: source.index.entryFrames }, result)
    if (!windows.length) break
    const measured = emptyLight(frameLight.length, source.lampPatch !== null)
    const sink = lightSink(source, measured)
    await decodeRanges(source.path, source.clip, source.index, windows, helpers, sink)
    sink.finish()
    timingLight(measured).forEach((value, frame) => {
      if (Number.isFinite(value)) frameLight[frame] = value
    })
    result = alignClip({ ...input, frameLight })
  }
  return result
}
