import { describe, expect, it } from 'vitest'
import { moveWindow, shiftedFrame, zoomWindow } from '../../../composables/lightWindow'

describe('the window over the frames', () => {
  it('never leaves the clip', () => {
    expect(moveWindow({ from: 900, to: 1000 }, 1000, 0.5)).toEqual({ from: 900, to: 1000 })
    expect(moveWindow({ from: 10, to: 110 }, 1000, -0.5)).toEqual({ from: 0, to: 100 })
    expect(zoomWindow({ from: 0, to: 600 }, 1000, 4)).toEqual({ from: 0, to: 1000 })
  })
  it('keeps the frame under the pointer when zooming', () => {
    const { from, to } = zoomWindow({ from: 0, to: 1000 }, 1000, 0.5, 250)
    expect((250 - from) / (to - from)).toBeCloseTo(0.25, 2)
  })
  it('does not become narrower than 20 frames', () => {
    const { from, to } = zoomWindow({ from: 100, to: 124 }, 1000, 0.1)
    expect(to - from).toBe(20)
  })
})

describe('the prediction while numbers are typed', () => {
  const old = { offsetSeconds: 0.4, driftPpm: 0 }
  it('stays where it is when nothing was changed', () => {
    expect(shiftedFrame(370, 50, old, old)).toBeCloseTo(370, 9)
  })
  it('moves to earlier frames when the offset grows: record time = offset + clip time', () => {
    expect(shiftedFrame(370, 50, old, { offsetSeconds: 0.5, driftPpm: 0 })).toBeCloseTo(365, 9)
  })
  it('moves later frames more when the drift changes', () => {
    expect(shiftedFrame(50_000, 50, { offsetSeconds: 0, driftPpm: 0 }, { offsetSeconds: 0, driftPpm: 100 })).toBeCloseTo(50_000 / 1.0001, 6)
  })
})
