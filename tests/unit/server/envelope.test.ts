import { describe, expect, it } from 'vitest'
import { averageLight } from '../../../server/utils/light'

describe('light in columns', () => {
  const measured = Float64Array.from({ length: 10 }, (_, i) => i)

  it('is the mean of the frames in each column, under its first frame', () => {
    expect(averageLight(measured, null, { from: 2, to: 8, columns: 3 })).toEqual({ frames: [2, 4, 6], measured: [2.5, 4.5, 6.5], predicted: null })
  })

  it('has no more columns than frames, and none beyond the clip', () => {
    expect(averageLight(measured, null, { from: 8, to: 99, columns: 100 })).toEqual({ frames: [8, 9], measured: [8, 9], predicted: null })
    expect(averageLight(measured, measured, { from: 50, to: 99, columns: 100 })).toEqual({ frames: [], measured: [], predicted: [] })
  })

  it('has no light where a glance has measured no frame', () => {
    const glanced = Float64Array.of(1, Number.NaN, Number.NaN, Number.NaN, 4, 4)
    expect(averageLight(glanced, null, { from: 0, to: 6, columns: 3 }).measured).toEqual([1, null, 4])
  })

  it('has no prediction where the record does not reach', () => {
    const predicted = Float64Array.of(Number.NaN, Number.NaN, Number.NaN, 4, 4, 4, 4, 4, 4, 4)
    expect(averageLight(measured, predicted, { from: 0, to: 6, columns: 3 }).predicted).toEqual([null, 4, 4])
  })
})
