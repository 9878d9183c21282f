import { describe, expect, it } from 'vitest'
import { forwardFigure, lstsqFigure, motionFigure } from '../support/figures/solveFigures'

/** OpenCV's phaseCorrelate (Fourier) and findTransformECC (Evangelidis & Psarakis 2008) look at the same pictures. */
describe('camera motion between noisy pictures of speckle', () => {
  it('is found within 0.01 px for 24 known shifts, and no worse than OpenCV finds it', () => {
    const { motionCases, worstMotionPx, worstPhaseCorrelatePx, worstEccPx } = motionFigure()
    expect(motionCases).toBe(24)
    expect(worstMotionPx).toBeLessThan(0.01)
    // They see the same shifts: a common mistake in how the pictures were made would show here.
    expect(worstEccPx).toBeLessThan(0.03)
    expect(worstPhaseCorrelatePx).toBeLessThan(1)
    expect(worstMotionPx).toBeLessThan(Math.min(worstEccPx, worstPhaseCorrelatePx))
  })
})

describe('solution of rendered takes', () => {
  it('equals numpy.linalg.lstsq on the exported integrals and sums', () => {
    expect(lstsqFigure().worstAgainstLstsq).toBeLessThan(3e-7)
  })

  it('has p and q within 1 % of the truth in amplitude and 0.5° in phase, with sensor noise and 8-bit codes', () => {
    const { worstAmplitude, worstPhaseDeg } = forwardFigure()
    expect(worstAmplitude).toBeLessThan(0.01)
    expect(worstPhaseDeg).toBeLessThan(0.5)
  })
})
