import { describe, expect, it } from 'vitest'
import { blockSamples, envelopeFromBlocks, EnvelopeBuilder } from '../../../server/utils/envelopeBins'
import { averageLight } from '../../../server/utils/light'

/** A seeded generator, so that a failure repeats (Lehmer, Park and Miller 1988). */
function noise(count: number, seed = 7): Float32Array {
  let state = seed
  return Float32Array.from({ length: count }, () => (state = state * 48271 % 2147483647) / 2147483647 - 0.5)
}
const pieces = (values: Float32Array, size: number) => Array.from({ length: Math.ceil(values.length / size) }, (_, i) => values.subarray(i * size, (i + 1) * size))

describe('envelope of a channel', () => {
  it('has the extremes of each bin, however the samples arrive', () => {
    const values = noise(10_007)
    for (const size of [1, 7, 4096, 20_000]) {
      const builder = new EnvelopeBuilder(values.length, 13)
      for (const piece of pieces(values, size)) builder.add(piece)
      for (let bin = 0; bin < 13; bin++) {
        const own = values.subarray(Math.floor(bin * 10_007 / 13), Math.floor((bin + 1) * 10_007 / 13))
        expect([builder.minimum[bin], builder.maximum[bin]]).toEqual([Math.min(...own), Math.max(...own)])
      }
    }
  })

  it('passes over values that are no numbers', () => {
    const builder = new EnvelopeBuilder(4, 2)
    builder.add(Float32Array.of(Number.NaN, 2, Number.NaN, Number.NaN))
    expect([...builder.minimum]).toEqual([2, Number.NaN])
  })

  it('out of an overview loses no spike', () => {
    const values = noise(100_000)
    values[0] = 9
    values[54_321] = -8
    values[99_999] = 7
    const blocks = new EnvelopeBuilder(values.length, Math.ceil(values.length / blockSamples), blockSamples)
    blocks.add(values)
    const { minimum, maximum } = envelopeFromBlocks(blocks, 0, values.length, 10)
    expect([maximum[0], minimum[5], maximum[9]]).toEqual([9, -8, 7])
    expect(maximum.slice(1, 9).every(value => value <= 0.5)).toBe(true)
  })
})

describe('light in columns', () => {
  const measured = Float64Array.from({ length: 10 }, (_, i) => i)

  it('is the mean of the frames in each column, under its first frame', () => {
    expect(averageLight(measured, null, { from: 2, to: 8, columns: 3 })).toEqual({ frames: [2, 4, 6], measured: [2.5, 4.5, 6.5], predicted: null })
  })

  it('has no more columns than frames, and none beyond the clip', () => {
    expect(averageLight(measured, null, { from: 8, to: 99, columns: 100 })).toEqual({ frames: [8, 9], measured: [8, 9], predicted: null })
    expect(averageLight(measured, measured, { from: 50, to: 99, columns: 100 })).toEqual({ frames: [], measured: [], predicted: [] })
  })

  it('has no prediction where the record does not reach', () => {
    const predicted = Float64Array.of(Number.NaN, Number.NaN, Number.NaN, 4, 4, 4, 4, 4, 4, 4)
    expect(averageLight(measured, predicted, { from: 0, to: 6, columns: 3 }).predicted).toEqual([null, 4, 4])
  })
})
