import PQueue from 'p-queue'
import { readFrameRanges, type FrameRange } from '../media/frameRanges'
import type { FrameLight } from './lightFile'
import type { StageHelpers } from './stage'
import { lightSink, type ClipSource } from './sumFiles'

/** Starting ffmpeg and seeking is most of the work of a short window, and one thread's work. */
const windowsAtOnce = 2

/** Measures the light of a few short windows of frames, several at a time. */
export async function measureWindows(source: ClipSource, windows: readonly FrameRange[], light: FrameLight, { signal, log }: Pick<StageHelpers, 'signal' | 'log'>): Promise<void> {
  const { path, clip, index } = source
  const pool = new PQueue({ concurrency: windowsAtOnce })
  await Promise.all(windows.map(window => pool.add(async () => {
    const sink = lightSink(source, light)
    const { errorLines } = await readFrameRanges(path, clip, index, [window], { signal, threads: 1, target: frame => sink.slot(frame) }, (_, frame) => sink.push(frame))
    sink.finish()
    for (const line of errorLines) log(`ffmpeg: ${line}`)
  })))
}
