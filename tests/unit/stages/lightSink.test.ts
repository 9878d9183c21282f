import { describe, expect, it } from 'vitest'
import { meterFrame } from '../../../jobs/imaging/accumulate'
import { countsPerWhite, createLightTable } from '../../../jobs/media/transfer'
import { emptyLight, timingLight } from '../../../jobs/stages/lightFile'
import { lightSink, type ClipSource } from '../../../jobs/stages/sumFiles'
import type { ClipFacts, LampPatch } from '../../../shared/measurement'
import { random } from '../imaging/pictures'

const clip = { width: 24, height: 10, bitDepth: 10, transfer: 'bt709', range: 'limited', frameCount: 11 } as ClipFacts
const table = createLightTable('bt709', 'limited', 10)
const next = random(2)
const frames = Array.from({ length: clip.frameCount }, () => new Uint16Array(240).map(() => Math.floor(next() * 1024)))

async function measure(lampPatch: LampPatch | null) {
  const light = emptyLight(clip.frameCount, lampPatch !== null)
  const sink = lightSink({ path: '', clip, index: {} as ClipSource['index'], lampPatch }, light)
  for (const [frame, luma] of frames.entries()) {
    sink.slot(frame).set(new Uint8Array(luma.buffer))
    await sink.push(frame)
  }
  sink.finish()
  return light
}

describe('measuring light', () => {
  it('gives each frame the mean of its whole picture, and clipped and black shares', async () => {
    const light = await measure(null)
    frames.forEach((luma, frame) => {
      const { counts, clipped, black } = meterFrame(luma, table)
      expect([light.light[frame], light.clipped[frame], light.black[frame]]).toEqual([counts / 240 / countsPerWhite, clipped / 240, black / 240])
    })
    expect(timingLight(light)).toBe(light.light)
  })

  it('measures the lamp patch too, and times by it', async () => {
    const rectangle = { left: 5, top: 2, width: 7, height: 3 }
    const light = await measure(rectangle)
    frames.forEach((luma, frame) => {
      const patch = meterFrame(luma, table, { rectangle, frameWidth: 24 })
      expect(light.patch![frame]).toBe(patch.counts / 21 / countsPerWhite)
    })
    expect(timingLight(light)).toBe(light.patch)
  })
})
