import { describe, expect, it } from 'vitest'
import { alignClip } from '../../../jobs/signal/align'
import { glancedLight, planGlance } from '../../../jobs/signal/glance'
import { planMoreWindows } from '../../../jobs/signal/glanceMore'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { drawTake } from '../../support/figures/alignTakes'

const keyFramesOf = (frames: number, interval: number) => Int32Array.from({ length: Math.ceil(frames / interval) }, (_, k) => k * interval)

describe('the plan of a glance', () => {
  it.each([12, 25, 50, 100, 250])('with a key frame every %i frames decodes 2.5 %% of the clip or 120 frames, in windows that begin with key frames', (interval) => {
    for (const frames of [1500, 3000, 9000, 18_000]) {
      const frameTimesSeconds = Float64Array.from({ length: frames }, (_, k) => k / 50)
      const plan = planGlance({ frameTimesSeconds, keyFrames: keyFramesOf(frames, interval) })
      expect(plan.decodedFrames).toBeLessThanOrEqual(Math.max(120, 0.025 * frames))
      expect(plan.windows.length).toBeGreaterThan(0)
      const measured = glancedLight(new Float64Array(frames), keyFramesOf(frames, interval), plan).filter(value => !Number.isNaN(value)).length
      expect(measured).toBeLessThanOrEqual(plan.decodedFrames)
      expect(measured).toBeGreaterThan(0.9 * plan.decodedFrames)
      plan.windows.forEach(({ firstFrame, frameCount }, n) => {
        expect(firstFrame % interval).toBe(0)
        expect(frameCount).toBeGreaterThan(0)
        expect(firstFrame + frameCount).toBeLessThanOrEqual(plan.windows[n + 1]?.firstFrame ?? frames)
      })
    }
  })

  it('of a clip with one key frame, and of a clip shorter than a glance, stays inside the clip', () => {
    const times = (frames: number) => Float64Array.from({ length: frames }, (_, k) => k / 50)
    expect(planGlance({ frameTimesSeconds: times(3000), keyFrames: [0] }).windows).toEqual([{ firstFrame: 0, frameCount: expect.any(Number) }])
    const short = planGlance({ frameTimesSeconds: times(60), keyFrames: [0, 30] })
    expect(short.decodedFrames).toBeLessThanOrEqual(60)
  })
})

describe('an alignment from a glance', () => {
  const take = drawTake(5, { seconds: [70, 70], change: { frameRateHz: 50, offsetSeconds: -4.321, driftPpm: 80, seconds: 70 } })
  const keyFrames = keyFramesOf(take.frameLight.length, 50)

  it('is within 0.05 frame and sure after one more look where several fit, and names what it leaves open', () => {
    const input = { ...take, keyFrames, darkLevel: null, frameLight: glancedLight(take.frameLight, keyFrames, planGlance({ ...take, keyFrames, leastFrames: 60, share: 0.01 })) }
    let found = alignClip(input)
    expect(found.contenders!.length).toBeGreaterThan(0)
    for (let round = 0; round < 3 && found.confidence < alignmentReviewBelow; round++) {
      const more = planMoreWindows(input, found)
      expect(more.decodedFrames).toBeLessThanOrEqual(80)
      for (const { firstFrame, frameCount } of more.windows) input.frameLight.set(take.frameLight.subarray(firstFrame, firstFrame + frameCount), firstFrame)
      found = alignClip(input)
    }
    expect(found.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(Math.abs(found.offsetSeconds - take.offsetSeconds) * 50).toBeLessThan(0.05)
  })

  it('of one window of level light is not sure', () => {
    const reference = take.timeline.regimes.find(regime => regime.spec.kind === 'reference' && regime.startSeconds > take.offsetSeconds + 6)!
    const first = Math.ceil((reference.startSeconds - take.offsetSeconds) * 50) + 5
    const frameLight = take.frameLight.map((value, k) => k >= first && k < first + 40 ? value : Number.NaN)
    expect(alignClip({ ...take, darkLevel: null, frameLight }).confidence).toBeLessThan(alignmentReviewBelow)
  })
})
