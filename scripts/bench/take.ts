import { spawn } from 'node:child_process'
import { once } from 'node:events'
import { existsSync } from 'node:fs'
import { mkdir, rename, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { buildSchedule, defineScenario, frameIntegrals, groupTruths, makeTimeline, writeRecordCsv, type GroupTruth, type Scenario, type Timeline } from '../../tests/support/forward'
import { makeQuantiser } from '../../tests/support/forward/camera'
import { seededRandom } from '../../tests/support/forward/random'
import { makeScene } from '../../tests/support/forward/scene'

export interface BenchTake {
  clip: string
  record: string
  scenario: Scenario
  truths: GroupTruth[]
}

export interface BenchSettings {
  seconds: number
  width: number
  height: number
  keyframeInterval: number
  bitsPerSecond: number
}

const frameRateHz = 50
const noiseLength = 1 << 20

/** A whole day's work in small: two lines, five repetitions each, as long as asked for. */
export function benchScenario({ seconds, width, height, keyframeInterval }: BenchSettings): Scenario {
  const repetitions = 5
  const lines = [{ frequencyHz: 412.3, repetitions }, { frequencyHz: 731.9, repetitions }]
  const darkSeconds = 1.2
  // 3 darks; 2 lines of 5 repetitions of 3 regimes; the offset in front, half a second of clip behind.
  const regimeSeconds = (seconds - 1 - 3 * darkSeconds) / (6 * repetitions) / 1.02
  const regimes = buildSchedule({ startSeconds: 1.4, lines, darkSeconds, referenceSeconds: regimeSeconds, phaseSeconds: regimeSeconds, levelVolts: 1.3, depth: 0.9, unevenness: 0.04 })
  return defineScenario({
    seed: 20, width, height, lines: lines.map(({ frequencyHz }) => ({ frequencyHz, field: [], forceNewtons: [4, -1] as [number, number] })),
    lamp: { regimes, darkVolts: 0.021 }, clock: { offsetSeconds: 0.9137, driftPpm: 37 },
    camera: { frameRate: { numerator: frameRateHz, denominator: 1 }, frameCount: Math.round(seconds * frameRateHz), exposureSeconds: 1 / frameRateHz },
    record: { sampleRateHz: 10_000, durationSeconds: seconds + 3 }, encoding: { keyframeInterval },
  })
}

/**
 * A full-size clip quickly: every frame is the still speckle under that frame's exact mean light, with sensor noise, so
 * that timing, sums and the decoder's work are those of a real take. Its motion is not rendered. Kept for the next run.
 */
export async function makeBenchTake(folder: string, settings: BenchSettings): Promise<BenchTake> {
  const scenario = benchScenario(settings)
  const name = `bench-${settings.width}x${settings.height}-${settings.seconds}s-gop${settings.keyframeInterval}-${settings.bitsPerSecond}`
  const clip = join(folder, `${name}.mp4`)
  const record = join(folder, `${name}.csv`)
  await mkdir(folder, { recursive: true })
  if (!existsSync(record)) {
    const timeline = makeTimeline(scenario)
    await encode(timeline, settings, `${clip}.part`)
    await rename(`${clip}.part`, clip)
    await writeRecordCsv(timeline, `${record}.part`)
    await rename(`${record}.part`, record)
  }
  await writeFile(join(folder, `${name}.json`), JSON.stringify(scenario))
  return { clip, record, scenario, truths: groupTruths(scenario) }
}

async function encode(timeline: Timeline, { width, height, keyframeInterval, bitsPerSecond }: BenchSettings, path: string): Promise<void> {
  const child = spawn('ffmpeg', [
    '-hide_banner', '-loglevel', 'error', '-y', '-f', 'rawvideo', '-pix_fmt', 'yuv420p', '-color_range', 'tv', '-s', `${width}x${height}`, '-framerate', String(frameRateHz), '-i', 'pipe:0',
    '-c:v', 'libx264', '-preset', 'veryfast', '-b:v', String(bitsPerSecond), '-maxrate', String(1.5 * bitsPerSecond), '-bufsize', String(2 * bitsPerSecond), '-g', String(keyframeInterval), '-bf', '2',
    '-color_range', 'tv', '-color_trc', 'bt709', '-colorspace', 'bt709', '-color_primaries', 'bt709', '-f', 'mp4', path,
  ], { stdio: ['pipe', 'ignore', 'inherit'] })
  const chroma = Buffer.alloc(width * height / 2, 128)
  for (const luma of frames(timeline)) {
    child.stdin.write(luma)
    if (!child.stdin.write(chroma)) await once(child.stdin, 'drain')
  }
  child.stdin.end()
  const [code] = await once(child, 'close') as [number]
  if (code !== 0) throw new Error(`ffmpeg could not make ${path}`)
}

/** Light is counted in 4096ths of white here: a table from there to codes makes a frame in milliseconds. */
function* frames(timeline: Timeline): Generator<Buffer> {
  const { width, height, camera, scene } = timeline.scenario
  const pixels = width * height
  const reflectance = makeScene(scene, width, height)
  const image = Float32Array.from({ length: pixels }, (_, i) => reflectance(i % width, Math.floor(i / width)))
  const next = seededRandom(5)
  const noise = Float32Array.from({ length: noiseLength + width }, () => 4096 * 0.012 * (next() + next() + next() - 1.5))
  const codes = new Uint8Array(8192)
  makeQuantiser(camera)(Float64Array.from(codes, (_, light) => light / 4096), codes)
  for (let frame = 0; frame < camera.frameCount; frame++) {
    const light = 4096 * camera.lightPerVolt * frameIntegrals(timeline, frame, 1).a
    const black = 4096 * camera.blackLight
    const luma = Buffer.allocUnsafe(pixels)
    for (let row = 0; row < pixels; row += width) {
      const from = Math.floor(next() * noiseLength)
      for (let column = 0; column < width; column++) {
        const value = light * image[row + column]! + black + noise[from + column]!
        luma[row + column] = codes[value < 0 ? 0 : value > 8191 ? 8191 : value | 0]!
      }
    }
    yield luma
  }
}
