import { describe, expect, it } from 'vitest'
import { alignClip } from '../../../jobs/signal/align'
import { correctFrameTimes } from '../../../jobs/signal/frameLoss'
import { shiftPath } from '../../../jobs/signal/frameLossPath'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { drawTake, type Take } from '../../support/figures/alignTakes'

function takeWith(losses: { frame: number, lostFrames: number }[], seed = 42): Take {
  return drawTake(seed, {
    seconds: [40, 40], change: { frameRateHz: 50, offsetSeconds: 2.345, driftPpm: 60, seconds: 40 },
    exposedAt: frame => losses.reduce((at, loss) => frame >= loss.frame ? at + loss.lostFrames : at, frame),
  })
}

const align = (take: Take, frameLight = take.frameLight) => alignClip({ ...take, frameLight, darkLevel: null })

describe('clip times corrected by losses', () => {
  it('are later from each loss on, earlier after doubled frames, and untouched without any', () => {
    const times = [0, 1, 2, 3, 4, 5]
    const losses = [{ frame: 2, uncertainFrames: 0, lostFrames: 3, lostSeconds: 3 }, { frame: 4, uncertainFrames: 1, lostFrames: -1, lostSeconds: -1 }]
    expect([...correctFrameTimes(times, losses)]).toEqual([0, 1, 5, 6, 6, 7])
    expect([...correctFrameTimes(times, [])]).toEqual(times)
  })
})

describe('the likeliest course of shifts', () => {
  // A signal with one peak every ten frames; from frame 55 on it comes two frames early.
  const misfit = (k: number, shift: number) => (k + (k >= 55 ? 2 : 0)) % 10 === (k + shift) % 10 || ((k + (k >= 55 ? 2 : 0)) % 10 && (k + shift) % 10) ? 0 : 12

  it('steps where the light can tell it, and names every frame where it may lie', () => {
    const { first, steps } = shiftPath(misfit, 100, 4)
    expect(first).toBe(0)
    expect(steps).toHaveLength(1)
    expect(steps[0].shift).toBe(2)
    expect(steps[0].frame - steps[0].uncertainFrames).toBeLessThanOrEqual(55)
    expect(steps[0].frame).toBeGreaterThanOrEqual(55)
    expect(steps[0].uncertainFrames).toBeLessThanOrEqual(8)
  })

  it('does not step for a flash of a single frame', () => {
    const { steps } = shiftPath((k, shift) => k === 50 ? 1e6 * (1 + shift * shift) : shift === 0 ? 0 : 1, 100, 4)
    expect(steps).toEqual([])
  })
})

describe('frames lost in mid-clip', () => {
  it.each([
    ['5 frames', [{ frame: 900, lostFrames: 5 }]],
    ['1 frame', [{ frame: 1100, lostFrames: 1 }]],
    ['a doubled frame', [{ frame: 1000, lostFrames: -1 }]],
    ['two gaps', [{ frame: 700, lostFrames: 3 }, { frame: 1400, lostFrames: 7 }]],
  ])('are found, placed and counted: %s', (_, made) => {
    const take = takeWith(made)
    const found = align(take)
    expect(found.losses.map(loss => loss.lostFrames)).toEqual(made.map(loss => loss.lostFrames))
    found.losses.forEach(({ frame, uncertainFrames, lostSeconds }, n) => {
      expect(made[n].frame).toBeLessThanOrEqual(frame)
      expect(made[n].frame).toBeGreaterThanOrEqual(frame - uncertainFrames)
      expect(lostSeconds).toBeCloseTo(made[n].lostFrames / 50, 9)
    })
    expect(Math.abs(found.offsetSeconds - take.offsetSeconds) * 50).toBeLessThan(0.01)
    expect(Math.abs(found.driftPpm - take.driftPpm)).toBeLessThan(3)
    expect(found.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(found.evidence.reasons.join(' ')).toMatch(/though the timestamps run on/)
  })

  it('are not seen in drift, flashes, a bump of light or a slow change of gain', () => {
    const take = takeWith([])
    const light = take.frameLight.map((value, k) => value * (1 + 0.03 * k / take.frameLight.length) + (k > 800 && k < 860 ? 0.02 : 0))
    light[500] += 0.3
    light[1501] += 0.2
    for (const frameLight of [take.frameLight, light]) {
      const found = align(take, frameLight)
      expect(found.losses).toEqual([])
      expect(Math.abs(found.offsetSeconds - take.offsetSeconds) * 50).toBeLessThan(0.01)
    }
  })
})
