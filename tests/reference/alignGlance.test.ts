import { describe, expect, it } from 'vitest'
import { glanceFigures, glanceOffsetFrames } from '../support/figures/glanceFigures'

describe('figure: alignment from a glance', () => {
  it('40 seeded takes of 60 to 180 s, key frames every 12 to 250 frames: 95 % within 0.05 frame from 4 % of the frames, none failing silently', () => {
    const figures = glanceFigures(40)
    console.info(`glance at ${figures.cases} takes: ${figures.good} good, ${figures.unsure} unsure, ${figures.silent} silently wrong; offset worst ${figures.worstOffsetFrames.toFixed(4)}, median ${figures.medianOffsetFrames.toFixed(5)} frame; ${(100 * figures.meanShare).toFixed(1)} % of the frames decoded`)
    expect(figures.silent).toBe(0)
    expect(figures.good).toBeGreaterThanOrEqual(0.95 * figures.cases)
    expect(figures.worstOffsetFrames).toBeLessThanOrEqual(glanceOffsetFrames)
    expect(figures.meanShare).toBeLessThan(0.045)
  }, 600_000)
})
