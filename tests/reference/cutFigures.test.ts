import { expect, it } from 'vitest'
import { cutFigures } from '../support/figures/cutFigures'

/** Limits from the method description: cut list, frequency and lamp phase over 100 seeded schedules. */
it('cut figures: 100 seeded schedules without a frame in a wrong group, an edge frame or a missing group', () => {
  const figures = cutFigures(100)
  expect(figures.schedules).toBe(100)
  expect(figures.groups).toBeGreaterThan(900)
  expect(figures.wrongFrames).toBe(0)
  expect(figures.edgeFrames).toBe(0)
  expect(figures.missingGroups).toBe(0)
  expect(figures.leastUsedShare).toBeGreaterThanOrEqual(0.9)
  expect(figures.worstFrequencyHz).toBeLessThan(0.01)
  expect(figures.worstPhaseDeg).toBeLessThan(0.2)
  expect(figures.worstDepth).toBeLessThan(0.01)
}, 300_000)
