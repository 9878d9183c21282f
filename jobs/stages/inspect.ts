import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { CodeRange, Transfer } from '../../shared/measurement'
import type { SourceFile } from '../../shared/stageOutputs'
import { writeNpy } from '../formats/npy'
import { encodeFrameIndex } from '../media/frameIndex'
import { probeClip } from '../media/probe'
import { sourceOf } from './inputs'
import { defineStage } from './stage'

interface Payload {
  source: SourceFile
  path: string
  transfer: Transfer
  range: CodeRange
}

/** Reads the clip; leaves its facts, the clip time of every frame, and where decoding can begin. */
export const inspect = defineStage<Payload>({
  load({ clip, acquisition }, store) {
    const source = sourceOf(clip, 'clip')
    return { source, path: store.localPath(source.fileKey), transfer: acquisition.transfer, range: acquisition.range }
  },

  async run({ source, path, transfer, range }, { workDir, signal }) {
    const { facts, flags, frameTimesSeconds, index, frameBytes } = await probeClip(path, { transfer, range }, signal)
    const files = { 'frame-times': join(workDir, 'frame-times.npy'), 'frame-index': join(workDir, 'frame-index'), 'frame-bytes': join(workDir, 'frame-bytes.npy') }
    await writeFile(files['frame-times'], writeNpy({ dtype: 'float64', shape: [frameTimesSeconds.length], data: frameTimesSeconds }))
    await writeFile(files['frame-bytes'], writeNpy({ dtype: 'float64', shape: [frameBytes.length], data: frameBytes }))
    await writeFile(files['frame-index'], encodeFrameIndex(index))
    return {
      state: 'done',
      message: `${facts.frameCount} frames of ${facts.width}×${facts.height} at ${Number(facts.frameRateHz.toFixed(3))} frames/s, ${facts.codec}, ${facts.bitDepth} bits.`,
      facts: { source, clip: facts }, files,
      flags: flags.map(flag => ({ ...flag, stage: 'inspect' })),
    }
  },
})
