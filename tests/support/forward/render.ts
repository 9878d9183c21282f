import { mkdir, rm, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { makeQuantiser } from './camera'
import { encodeClip } from './encode'
import { FrameRenderer, makeSensorNoise } from './frames'
import { audioWav, writeRecordCsv } from './record'
import type { Scenario } from './scenario'
import { makeTimeline } from './timeline'
import { makeTruth, type Truth } from './truth'

export interface RenderedScene { clipPath: string, recordPath: string, truthPath: string, truth: Truth }

/** The luma codes of frame after frame; every yielded array is a new one. */
export function* renderLuma(scenario: Scenario, renderer = new FrameRenderer(makeTimeline(scenario))): Generator<Uint8Array | Uint16Array> {
  const { camera, width, height } = scenario
  const light = new Float64Array(width * height)
  const addNoise = makeSensorNoise(scenario.seed + 7, width, camera.readNoise, camera.shotNoise)
  const quantise = makeQuantiser(camera)
  for (let frame = 0; frame < camera.frameCount; frame++) {
    addNoise(renderer.light(frame, light))
    const luma = camera.bitDepth === 8 ? new Uint8Array(width * height) : new Uint16Array(width * height)
    quantise(light, luma)
    yield luma
  }
}

/** Renders a scenario to `<name>.mp4` (or its container), `<name>.csv` and `<name>.truth.json` in `outDir`. */
export async function renderScene(scenario: Scenario, outDir: string, name = 'scene'): Promise<RenderedScene> {
  await mkdir(outDir, { recursive: true })
  const path = (ending: string) => join(outDir, `${name}.${ending}`)
  const renderer = new FrameRenderer(makeTimeline(scenario))
  const clipPath = path(scenario.encoding.container)
  const audioPath = scenario.encoding.audio ? path('audio.wav') : null
  if (audioPath) await writeFile(audioPath, audioWav(renderer.timeline))
  await encodeClip(scenario, renderLuma(scenario, renderer), clipPath, audioPath)
  if (audioPath) await rm(audioPath)
  await writeRecordCsv(renderer.timeline, path('csv'))
  const truth = makeTruth(scenario, renderer)
  await writeFile(path('truth.json'), JSON.stringify(truth))
  return { clipPath, recordPath: path('csv'), truthPath: path('truth.json'), truth }
}
