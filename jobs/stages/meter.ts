import { join } from 'node:path'
import { readKeyFrames } from '../media/keyFrames'
import { planGlance } from '../signal/glance'
import { planChangeGlance } from '../signal/glanceWindows'
import { clipPathsOf, openClip, type ClipPaths } from './clipSource'
import { pathOf, readFloat64 } from './inputs'
import { emptyLight, writeLight } from './lightFile'
import { defineStage } from './stage'
import { measureWindows } from './measureWindows'
import { lightSink } from './sumFiles'

interface Payload {
  source: ClipPaths
  frameTimes: string
  frameBytes: string
}

/**
 * Measures the light of as many frames as the alignment needs: key frames, and a few windows of frames in a row. Every
 * frame is measured by the sum stage, which decodes the clip anyway.
 */
export const meter = defineStage<Payload>({
  load: (situation, store) => ({ source: clipPathsOf(situation, store), frameTimes: pathOf(situation, store, 'inspect', 'frame-times'), frameBytes: pathOf(situation, store, 'inspect', 'frame-bytes') }),

  async run({ source: paths, frameTimes, frameBytes }, helpers) {
    const source = await openClip(paths)
    const { clip, path, index } = source
    const light = emptyLight(clip.frameCount, source.lampPatch !== null)
    const plan = planChangeGlance({ frameCount: clip.frameCount, keyFrames: index.entryFrames, packetBytes: await readFloat64(frameBytes) })
      ?? planGlance({ frameTimesSeconds: await readFloat64(frameTimes), keyFrames: index.entryFrames })
    if (plan.useKeyFrames) {
      const sink = lightSink(source, light)
      await readKeyFrames(path, clip, index, { signal: helpers.signal, target: frame => sink.slot(frame) }, (_, frame) => sink.push(frame))
      sink.finish()
    }
    await measureWindows(source, plan.windows, light, helpers)
    const file = join(helpers.workDir, 'glance.npz')
    await writeLight(file, light)
    const measured = light.light.filter(Number.isFinite)
    const meanLight = measured.reduce((sum, value) => sum + value, 0) / measured.length
    return { state: 'done', message: `A glance at ${measured.length} of ${clip.frameCount} frames, mean light ${(100 * meanLight).toFixed(1)} % of white.`, facts: { frameCount: clip.frameCount, glanced: measured.length, meanLight }, files: { glance: file }, flags: [] }
  },
})
