import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { CodeRange, Transfer } from '../../shared/measurement'
import type { SourceFile } from '../../shared/stageOutputs'
import { writeNpy } from '../formats/npy'
import { probeClip } from '../media/probe'
import { sourceOf } from './inputs'
import { defineStage } from './stage'

interface Payload {
  source: SourceFile
  path: string
  transfer: Transfer
  range: CodeRange
}

/** Reads the clip; leaves its facts and the clip time of every frame. */
export const inspect = defineStage<Payload>({
  load({ clip, acquisition }, store) {
    const source = sourceOf(clip, 'clip')
    return { source, path: store.localPath(source.fileKey), transfer: acquisition.transfer, range: acquisition.range }
  },

  async run({ source, path, transfer, range }, { workDir, signal }) {
    const { facts, flags, frameTimesSeconds } = await probeClip(path, { transfer, range }, signal)
    const times = join(workDir, 'frame-times.npy')
    await writeFile(times, writeNpy({ dtype: 'float64', shape: [frameTimesSeconds.length], data: frameTimesSeconds }))
    return {
      state: 'done',
      message: `${facts.frameCount} frames of ${facts.width}×${facts.height} at ${Number(facts.frameRateHz.toFixed(3))} frames/s, ${facts.codec}, ${facts.bitDepth} bits.`,
      facts: { source, clip: facts },
      files: { 'frame-times': times },
      flags: flags.map(flag => ({ ...flag, stage: 'inspect' })),
    }
  },
})
