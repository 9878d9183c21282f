import { describe, expect, it } from 'vitest'
import { alignClip, alignNear } from '../../../jobs/signal/align'
import { alignmentReviewBelow } from '../../../shared/measurement'
import { drawTake } from '../../support/figures/alignTakes'

describe('an alignment made anew from a near start', () => {
  const takes = [1, 2, 3].map(seed => drawTake(seed, { seconds: [30, 30], change: { offsetSeconds: [-7.7, 0.4, 12.3][seed - 1] } }))

  it.each(takes.map(take => [take.frameRateHz, take] as const))('is that of the full search, for a start off by 0.3 frame and 5 ppm (%f frames/s)', (_, take) => {
    const full = alignClip({ ...take, darkLevel: null })
    const near = alignNear({ ...take, darkLevel: null }, { offsetSeconds: take.offsetSeconds + 0.3 / take.frameRateHz, driftPpm: take.driftPpm - 5 })
    expect(Math.abs(near.offsetSeconds - full.offsetSeconds) * take.frameRateHz).toBeLessThan(1e-3)
    expect(Math.abs(near.driftPpm - full.driftPpm)).toBeLessThan(0.2)
    expect(near.confidence).toBeGreaterThan(alignmentReviewBelow)
    expect(near.residual).toBeCloseTo(full.residual, 6)
  })

  it('finds the right place from a start that is wrong by seconds', () => {
    const take = takes[0]
    const near = alignNear({ ...take, darkLevel: null }, { offsetSeconds: take.offsetSeconds + 3.1, driftPpm: 0 })
    expect(Math.abs(near.offsetSeconds - take.offsetSeconds) * take.frameRateHz).toBeLessThan(0.01)
  })
})
