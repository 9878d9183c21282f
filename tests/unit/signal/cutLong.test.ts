import { describe, expect, it } from 'vitest'
import { cutFrames } from '../../../jobs/signal/cut'
import { splitLong } from '../../../jobs/signal/cutLong'
import type { Group, Regime } from '../../../shared/measurement'

const group = (frameCount: number): Group => ({ id: 'l1-r1-ref', line: 1, frequencyHz: 100, repetition: 1, role: 'reference', lampPhaseDeg: null, depth: null, firstFrame: 7, frameCount, accepted: true, flags: [] })

describe('a group too long for an exact sum', () => {
  it('becomes consecutive groups that hold the same frames, none longer than 65 536', () => {
    expect(splitLong(group(65_536))).toHaveLength(1)
    const parts = splitLong(group(200_000))
    expect(parts).toHaveLength(4)
    let next = 7
    for (const { firstFrame, frameCount } of parts) {
      expect(firstFrame).toBe(next)
      expect(frameCount).toBeLessThanOrEqual(65_536)
      next += frameCount
    }
    expect(next).toBe(7 + 200_000)
  })

  it('is cut into several by the cut of an hour-long reference, under ids of their own', () => {
    const regime = (kind: Regime['kind'], startSeconds: number, endSeconds: number): Regime => ({ kind, startSeconds, endSeconds, level: 1, flags: [], ...kind === 'harmonic' ? { frequencyHz: 233.7, lampPhaseDeg: 0, depth: 1, distortion: 0 } : { frequencyHz: null, lampPhaseDeg: null, depth: null, distortion: null } })
    const { groups } = cutFrames({
      regimes: [regime('constant', 0, 3600), regime('harmonic', 3600, 3602), { ...regime('harmonic', 3602, 3604), lampPhaseDeg: 90 }], alignment: { offsetSeconds: 0, driftPpm: 0 },
      frameTimesSeconds: Float64Array.from({ length: 180_200 }, (_, k) => k / 50), exposureSeconds: 0.02,
    })
    const references = groups.filter(each => each.role === 'reference')
    expect(references.map(({ id }) => id)).toEqual(['l1-r1-ref', 'l1-r1-ref-2', 'l1-r1-ref-3'])
    expect(references.reduce((sum, { frameCount }) => sum + frameCount, 0)).toBeGreaterThan(179_990)
    expect(Math.max(...references.map(({ frameCount }) => frameCount))).toBeLessThanOrEqual(65_536)
  })
})
