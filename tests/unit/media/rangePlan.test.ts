import { describe, expect, it } from 'vitest'
import { decodeFrameIndex, encodeFrameIndex, frameAtTick, type FrameIndex } from '../../../jobs/media/frameIndex'
import { normalizeRanges, planRuns } from '../../../jobs/media/rangePlan'
import { hasExactRecoveryPoint } from '../../../jobs/media/recoveryPoints'

const index: FrameIndex = { timeBase: { numerator: 1, denominator: 90_000 }, ticks: Float64Array.of(-5, 0, 7, 7, 9, 2 ** 40), keyFrames: Int32Array.of(0, 4), entryFrames: Int32Array.of(4), needsRunUp: true }

describe('the frame index', () => {
  it('survives storing, at any offset of the bytes', () => {
    const bytes = encodeFrameIndex(index)
    expect(decodeFrameIndex(bytes)).toEqual(index)
    const shifted = new Uint8Array(bytes.length + 3)
    shifted.set(bytes, 3)
    expect(decodeFrameIndex(shifted.subarray(3))).toEqual(index)
    expect(() => decodeFrameIndex(bytes.subarray(0, -1))).toThrow(RangeError)
    expect(() => decodeFrameIndex(new Uint8Array(48))).toThrow(RangeError)
  })

  it('tells a frame by its tick, but not where two bear the same', () => {
    expect([-6, -5, 0, 7, 8, 9, 2 ** 40].map(tick => frameAtTick(index, tick))).toEqual([-1, 0, 1, -1, -1, 4, 5])
  })
})

describe('ranges', () => {
  it('are merged where they touch or overlap, and refused outside the clip', () => {
    expect(normalizeRanges([{ firstFrame: 8, frameCount: 4 }, { firstFrame: 0, frameCount: 3 }, { firstFrame: 3, frameCount: 2 }, { firstFrame: 9, frameCount: 1 }, { firstFrame: 50, frameCount: 0 }], 20)).toEqual([{ firstFrame: 0, frameCount: 5 }, { firstFrame: 8, frameCount: 4 }])
    expect(() => normalizeRanges([{ firstFrame: 18, frameCount: 3 }], 20)).toThrow(RangeError)
    expect(() => normalizeRanges([{ firstFrame: -1, frameCount: 3 }], 20)).toThrow(RangeError)
  })

  it('share a run where seeking would save little, and begin at the entry before', () => {
    const entryFrames = Int32Array.from({ length: 20 }, (_, i) => 50 * i)
    const runs = planRuns([{ firstFrame: 120, frameCount: 5 }, { firstFrame: 148, frameCount: 4 }, { firstFrame: 700, frameCount: 1 }, { firstFrame: 720, frameCount: 1 }], { entryFrames })
    expect(runs.map(({ entry, ranges }) => [entry, ranges.length])).toEqual([[2, 2], [14, 2]])
    expect(planRuns([{ firstFrame: 900, frameCount: 2 }], { entryFrames: new Int32Array(0) })).toMatchObject([{ entry: -1 }])
  })
})

it('a recovery point counts only when it is exact, at once and unbroken', () => {
  // Bits behind type 6 and size 1: ue(recovery_frame_cnt), exact_match_flag, broken_link_flag.
  const message = (bits: number) => Uint8Array.of(6, 6, 1, bits, 0x80)
  expect(hasExactRecoveryPoint(message(0b1100_0100))).toBe(true)
  expect(hasExactRecoveryPoint(message(0b1000_0100))).toBe(false)
  expect(hasExactRecoveryPoint(message(0b1110_0100))).toBe(false)
  expect(hasExactRecoveryPoint(message(0b0101_0001))).toBe(false)
  expect(hasExactRecoveryPoint(Uint8Array.of(6, 5, 2, 9, 9, 6, 1, 0b1100_0100, 0x80))).toBe(true)
})
