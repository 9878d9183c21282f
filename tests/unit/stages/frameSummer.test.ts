import { describe, expect, it } from 'vitest'
import { addFrame, meterFrame, type FrameMeter } from '../../../jobs/imaging/accumulate'
import { framesNeeded, planSums, type FrameSpan } from '../../../jobs/imaging/sumPlan'
import { LightKernel } from '../../../jobs/kernels/lightKernel'
import { createLightTable } from '../../../jobs/media/transfer'
import { FrameSummer } from '../../../jobs/stages/frameSummer'
import { random } from '../imaging/pictures'

const pixels = 97
const table = createLightTable('bt709', 'limited', 8)
const next = random(8)
const clip = Array.from({ length: 140 }, () => new Uint8Array(pixels).map(() => Math.floor(next() * 256)))

function sumOf({ firstFrame, frameCount }: FrameSpan): Uint32Array {
  const sum = new Uint32Array(pixels)
  for (const frame of clip.slice(firstFrame, firstFrame + frameCount)) addFrame(sum, frame, table)
  return sum
}

/** Feeds the summer the frames that it needs, or all of them when they are measured too. */
async function run(targets: FrameSpan[], bases: FrameSpan[], measure = false) {
  const tasks = planSums(targets, measure ? [] : bases)
  const sums = new Map<FrameSpan, Uint32Array>()
  const meters = new Map<number, FrameMeter>()
  const summer = new FrameSummer(new LightKernel(pixels, table), tasks, {
    read: async base => sumOf(base),
    write: async ({ target }, image) => void sums.set(target, image.slice()),
    ...measure ? { meter: (frame, meter) => void meters.set(frame, meter) } : {},
  })
  for (const { firstFrame, frameCount } of measure ? [{ firstFrame: 0, frameCount: clip.length }] : framesNeeded(tasks)) {
    for (let frame = firstFrame; frame < firstFrame + frameCount; frame++) {
      // A reader that has to start again asks for the same frame's memory twice.
      if (frame % 7 === 0) summer.slot(frame).fill(255)
      summer.slot(frame).set(clip[frame]!)
      await summer.push(frame)
    }
  }
  summer.finish()
  for (const { target, parts, base } of tasks) if (!parts.length) sums.set(target, sumOf(base!))
  return { sums, meters }
}

describe('the frame summer', () => {
  it('makes every sum of a whole clip and measures all its frames', async () => {
    const targets = [{ firstFrame: 3, frameCount: 20 }, { firstFrame: 23, frameCount: 1 }, { firstFrame: 24, frameCount: 40 }, { firstFrame: 70, frameCount: 70 }]
    const { sums, meters } = await run(targets, [], true)
    for (const target of targets) expect([...sums.get(target)!]).toEqual([...sumOf(target)])
    expect([...meters.keys()]).toEqual(clip.map((_, frame) => frame))
    for (const [frame, meter] of meters) expect(meter).toEqual(meterFrame(clip[frame]!, table))
  })

  it('gives the same sums by difference, bit for bit, for 60 random cut lists and overlapping groups too', async () => {
    const some = () => Array.from({ length: 1 + Math.floor(next() * 5) }, () => {
      const firstFrame = Math.floor(next() * 100)
      return { firstFrame, frameCount: 1 + Math.floor(next() * 40) }
    })
    for (let trial = 0; trial < 60; trial++) {
      const targets = some()
      const { sums } = await run(targets, some())
      expect(sums.size).toBe(targets.length)
      for (const target of targets) expect([...sums.get(target)!]).toEqual([...sumOf(target)])
    }
  })

  it('says so when frames are missing', () => {
    const summer = new FrameSummer(new LightKernel(pixels, table), planSums([{ firstFrame: 0, frameCount: 2 }], []), { read: async () => new Uint32Array(pixels), write: async () => {} })
    expect(() => summer.finish()).toThrow(/before every sum was complete/)
  })
})
