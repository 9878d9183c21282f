import { execFileSync } from 'node:child_process'
import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, describe, expect, it } from 'vitest'
import { buildSchedule, defineScenario, renderLuma, renderScene, type Scenario, type ScenarioInput } from '../../support/forward'
import { encodeClip, EncodingError } from '../../support/forward/encode'

const directory = mkdtempSync(join(tmpdir(), 'forward-clip-'))
afterAll(() => rmSync(directory, { recursive: true }))

const regimes = buildSchedule({ startSeconds: 0, lines: [{ frequencyHz: 190, repetitions: 1 }], darkSeconds: 0.2, referenceSeconds: 0.3, phaseSeconds: 0.3, levelVolts: 2, depth: 0.9 })
const scenarioOf = (input: Partial<ScenarioInput>): Scenario => defineScenario({ width: 64, height: 48, lines: [{ frequencyHz: 190, forceNewtons: [2, 0], field: [{ ux: [0.2, 0], uy: [0, 0.1] }] }], lamp: { regimes }, ...input })

const decode = (clip: string, ...filter: string[]) => execFileSync('ffmpeg', ['-loglevel', 'error', '-i', clip, ...filter, '-f', 'rawvideo', 'pipe:1'], { maxBuffer: 1 << 28 })
const probe = (clip: string) => JSON.parse(execFileSync('ffprobe', ['-v', 'error', '-count_packets', '-show_streams', '-of', 'json', clip], { encoding: 'utf8' })).streams as Record<string, unknown>[]
const bytesOf = (scenario: Scenario) => Buffer.concat([...renderLuma(scenario)].map(luma => Buffer.from(luma.buffer)))

describe('clips of the forward model', () => {
  it.each([['limited', 8, 'mp4'], ['full', 8, 'mp4'], ['limited', 10, 'mkv'], ['full', 10, 'mov']] as const)('give back the very luma codes when lossless: %s range, %i bits, %s', async (range, bitDepth, container) => {
    const scenario = scenarioOf({ camera: { range, bitDepth }, encoding: { crf: 'lossless', container } })
    const { clipPath } = await renderScene(scenario, directory, `${range}-${bitDepth}`)
    expect(decode(clipPath, '-vf', 'extractplanes=y').equals(bytesOf(scenario))).toBe(true)
    expect(probe(clipPath)[0]).toMatchObject({ color_range: range === 'full' ? 'pc' : 'tv', color_transfer: 'bt709', nb_read_packets: String(scenario.camera.frameCount) })
  })

  it('have grey chroma', async () => {
    const scenario = scenarioOf({ camera: { frameCount: 3 }, encoding: { crf: 'lossless' } })
    const { clipPath } = await renderScene(scenario, directory, 'grey')
    expect(new Set(decode(clipPath, '-vf', 'extractplanes=u'))).toEqual(new Set([128]))
  })

  it('keep the exact frame rate, every frame, B-frames and sparse keyframes', async () => {
    const scenario = scenarioOf({ camera: { frameRate: { numerator: 30000, denominator: 1001 }, exposureSeconds: 0.03 }, encoding: { bFrames: 3, keyframeInterval: 250 } })
    const { clipPath, truth } = await renderScene(scenario, directory, 'rational')
    expect(probe(clipPath)[0]).toMatchObject({ r_frame_rate: '30000/1001', has_b_frames: 2 })
    expect(decode(clipPath, '-vf', 'extractplanes=y').length / (64 * 48)).toBe(truth.frameCount)
    const keyframes = execFileSync('ffprobe', ['-v', 'error', '-select_streams', 'v', '-show_entries', 'packet=flags', '-of', 'csv=p=0', clipPath], { encoding: 'utf8' }).split('\n').filter(line => line.includes('K'))
    expect(keyframes.length).toBeLessThan(truth.frameCount / 4)
  })

  it('keep the mean light of every frame within 0.2 % of white at the default quality', async () => {
    const { clipPath, truth } = await renderScene(scenarioOf({ camera: { transfer: 'linear', range: 'full' } }), directory, 'default')
    const codes = decode(clipPath, '-vf', 'extractplanes=y')
    truth.meanLight.forEach((light, frame) => {
      const mean = codes.subarray(frame * 64 * 48, (frame + 1) * 64 * 48).reduce((sum, code) => sum + code, 0) / (64 * 48)
      expect(Math.abs(mean / 255 - light)).toBeLessThan(0.002)
    })
  })

  it('say nothing of range and transfer when untagged', async () => {
    const { clipPath } = await renderScene(scenarioOf({ camera: { frameCount: 3 }, encoding: { tagged: false } }), directory, 'untagged')
    expect(probe(clipPath)[0]!.color_transfer).toBeUndefined()
  })

  it.each([['pcm_s16le', 'mov'], ['flac', 'mkv'], ['aac', 'mp4']] as const)('carry the photodiode as sound: %s in %s', async (codec, container) => {
    const scenario = scenarioOf({ encoding: { container, audio: { codec, sampleRateHz: 48_000, fullScaleVolts: 5 } } })
    const { clipPath } = await renderScene(scenario, directory, `sound-${codec}`)
    const sound = execFileSync('ffmpeg', ['-loglevel', 'error', '-i', clipPath, '-map', '0:a', '-f', 'f32le', 'pipe:1'], { maxBuffer: 1 << 26 })
    const samples = new Float32Array(sound.buffer, sound.byteOffset, sound.length / 4)
    const mean = (from: number, to: number) => samples.subarray(from * 48_000, to * 48_000).reduce((sum, value) => sum + value, 0) / ((to - from) * 48_000)
    expect(mean(0.02, 0.18)).toBeCloseTo(0, 2)
    if (codec !== 'aac') expect(mean(0.22, 0.48)).toBeCloseTo(2 / 5, 3)
  })

  it('end in a readable error when ffmpeg refuses', async () => {
    const scenario = scenarioOf({ camera: { frameCount: 5 }, encoding: { preset: 'no-such-preset' } })
    await expect(encodeClip(scenario, renderLuma(scenario), join(directory, 'refused.mp4'))).rejects.toThrow(EncodingError)
  })
})
