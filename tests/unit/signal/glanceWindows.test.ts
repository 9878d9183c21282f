import { describe, expect, it } from 'vitest'
import { planChangeGlance } from '../../../jobs/signal/glanceWindows'
import { findSizeChanges } from '../../../jobs/signal/sizeChanges'
import { random } from '../imaging/pictures'

/** Sizes as encoders make them: big key frames, two small B-frames behind each P-frame, scatter, and a factor for each stretch of light. */
function sizes(frameCount: number, interval: number, edges: number[], seed: number) {
  const next = random(seed)
  const keyFrames = Array.from({ length: Math.ceil(frameCount / interval) }, (_, k) => k * interval)
  const packetBytes = Float64Array.from({ length: frameCount }, (_, frame) => {
    const dark = edges.filter(edge => edge <= frame).length % 2 === 0
    const kind = frame % interval === 0 ? 8 : frame % 3 === 0 ? 2 : 0.7
    return 20_000 * kind * (dark ? 0.3 : 1) * Math.exp(0.5 * (next() - 0.5))
  })
  return { frameCount, keyFrames, packetBytes }
}

describe('changes of the compressed size', () => {
  it('show the lamp’s edges within three frames, in 50 seeded clips', () => {
    for (let seed = 1; seed <= 50; seed++) {
      const edges = [84 + seed, 1468, 1530, 2915 - seed]
      const { packetBytes, keyFrames } = sizes(3000, 50, edges, seed)
      const found = findSizeChanges(packetBytes, keyFrames).slice(0, 4).map(({ frame }) => frame).sort((a, b) => a - b)
      expect(found).toHaveLength(4)
      found.forEach((frame, index) => expect(Math.abs(frame - edges[index]!), `seed ${seed}`).toBeLessThanOrEqual(3))
    }
  })

  it('are none where every frame has the same size, or the clip is short', () => {
    expect(findSizeChanges(new Float64Array(2000).fill(5000), [0, 50])).toEqual([])
    expect(findSizeChanges(new Float64Array(40).map((_, k) => k), [0])).toEqual([])
  })

  it('are seen where all frames are key frames', () => {
    const packetBytes = Float64Array.from({ length: 400 }, (_, k) => (k < 150 ? 1000 : 4000) + 10 * (k % 7))
    expect(findSizeChanges(packetBytes, [...packetBytes.keys()])[0]!.frame).toBe(150)
  })
})

describe('the windows of a glance', () => {
  it('lie over edges at least a third of the clip apart, within the budget', () => {
    for (let seed = 1; seed <= 20; seed++) {
      const edges = [84, 1468, 1530, 2915]
      const { windows, decodedFrames } = planChangeGlance(sizes(3000, 50, edges, seed))!
      for (const { firstFrame, frameCount } of windows) expect(edges.some(edge => edge > firstFrame + 3 && edge < firstFrame + frameCount - 8)).toBe(true)
      expect(windows.at(-1)!.firstFrame - windows[0]!.firstFrame).toBeGreaterThan(1000)
      expect(windows.length).toBeGreaterThanOrEqual(3)
      expect(windows.every(({ firstFrame }) => firstFrame % 50 === 0)).toBe(true)
      expect(decodedFrames).toBeLessThanOrEqual(260)
    }
  })

  it('reach over the clip rather than crowd where edges are many', () => {
    for (let seed = 1; seed <= 20; seed++) {
      const { windows } = planChangeGlance(sizes(3000, 50, [100, 160, 220, 280, 340, 400, 2900], seed))!
      expect(windows.some(({ firstFrame, frameCount }) => firstFrame < 2900 && 2900 < firstFrame + frameCount), `seed ${seed}`).toBe(true)
    }
  })

  it('take edges even where key frames are far apart, and give up when that costs too much', () => {
    expect(planChangeGlance(sizes(3000, 250, [90, 2800], 4))!.windows).toHaveLength(2)
    expect(planChangeGlance(sizes(3000, 3000, [1400, 2800], 5))).toBeNull()
  })

  it('are left to another plan when nothing changes', () => {
    expect(planChangeGlance(sizes(3000, 50, [], 6))).toBeNull()
  })
})
