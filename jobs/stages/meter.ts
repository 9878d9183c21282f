import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { ClipFacts } from '../../shared/measurement'
import { writeNpz } from '../formats/npz'
import { meterFrame } from '../imaging/accumulate'
import { countsPerWhite, createLightTable } from '../media/transfer'
import { factsOf } from './inputs'
import { decodeClip } from './decode'
import { defineStage } from './stage'

interface Payload {
  path: string
  clip: ClipFacts
}

/** Measures the light of every frame: mean, clipped and black share, change from the frame before. */
export const meter = defineStage<Payload>({
  load(situation, store) {
    const { source, clip } = factsOf(situation, 'inspect')
    return { path: store.localPath(source.fileKey), clip }
  },

  async run({ path, clip }, helpers) {
    const table = createLightTable(clip.transfer, clip.range, clip.bitDepth)
    const pixels = clip.width * clip.height
    const light = new Float64Array(clip.frameCount)
    const clipped = new Float64Array(clip.frameCount)
    const black = new Float64Array(clip.frameCount)
    const difference = new Float64Array(clip.frameCount)
    const frameCount = await decodeClip(path, clip, helpers, (luma, index) => {
      const frame = meterFrame(luma, table)
      light[index] = frame.counts / pixels / countsPerWhite
      clipped[index] = frame.clipped / pixels
      black[index] = frame.black / pixels
      difference[index] = index ? light[index]! - light[index - 1]! : 0
    })
    const meanLight = light.reduce((sum, value) => sum + value, 0) / frameCount
    const file = join(helpers.workDir, 'meter.npz')
    const column = (data: Float64Array) => ({ dtype: 'float64' as const, shape: [frameCount], data })
    await writeFile(file, writeNpz({ light: column(light), clipped: column(clipped), black: column(black), difference: column(difference) }))
    return { state: 'done', message: `${frameCount} frames, mean light ${(100 * meanLight).toFixed(1)} % of white.`, facts: { frameCount, meanLight }, files: { meter: file }, flags: [] }
  },
})
