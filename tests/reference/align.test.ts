import { describe, expect, it } from 'vitest'
import { alignFigures, largestDriftPpm, largestOffsetFrames } from '../support/figures/alignFigures'

// The forward model under tests/support/forward shares no code with the alignment.
describe('figure: alignment', () => {
  it('100 seeded takes, 20 to 60 s in common, offset in ±30 s, drift to ±200 ppm: within 0.01 frame and 3 ppm, none failing silently', () => {
    const figures = alignFigures(100)
    console.info(`alignment of ${figures.cases} takes: offset worst ${figures.worstOffsetFrames.toFixed(4)}, median ${figures.medianOffsetFrames.toFixed(5)} frame; drift worst ${figures.worstDriftPpm.toFixed(2)} ppm; ${figures.unsure} ask for a person, ${figures.silent} silently wrong, ${figures.losses} losses invented`)
    expect(figures.silent).toBe(0)
    expect(figures.losses).toBe(0)
    expect(figures.unsure).toBeLessThanOrEqual(4)
    expect(figures.worstOffsetFrames).toBeLessThanOrEqual(largestOffsetFrames)
    expect(figures.worstDriftPpm).toBeLessThanOrEqual(largestDriftPpm)
  }, 600_000)
})
