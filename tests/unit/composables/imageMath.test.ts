import { describe, expect, it } from 'vitest'
import { fitView, imageStatistics, paintImage, zoomView } from '../../../composables/imageMath'

const map = Uint32Array.from({ length: 256 }, (_, index) => index)

describe('painting an image', () => {
  it('puts low on the first colour, high on the last, and clamps outside', () => {
    const out = new Uint32Array(6)
    paintImage(Float32Array.from([-5, 0, 0.5, 1, 7, Number.NaN]), 1, 0, 1, map, out)
    expect([...out]).toEqual([0, 0, 127, 255, 255, 0])
  })
  it('turns a sum of frames into mean light by its scale', () => {
    const out = new Uint32Array(1)
    paintImage(Uint32Array.from([50_000 * 59]), 1 / (50_000 * 59), 0, 2, map, out)
    expect(out[0]).toBe(127)
  })
})

describe('statistics of an image', () => {
  const values = Float32Array.from({ length: 1000 }, (_, index) => index)
  it('leaves half a percent outside at either end', () => {
    const { minimum, maximum, low, high } = imageStatistics({ values, rows: 10, columns: 100 }, 1)
    expect([minimum, maximum, low, high]).toEqual([0, 999, 5, 995])
  })
  it('counts every pixel of a small image in the histogram', () => {
    const { histogram } = imageStatistics({ values, rows: 10, columns: 100 }, 1, 10)
    expect(histogram).toEqual(Array(10).fill(100))
  })
  it('finds the range of a large image though it samples the rest', () => {
    const large = new Uint32Array(1_000_000).fill(100)
    large[777_777] = 5000
    const { maximum, high } = imageStatistics({ values: large, rows: 1000, columns: 1000 }, 1)
    expect(maximum).toBe(5000)
    expect(high).toBeGreaterThan(100)
  })
  it('survives an image of nothing but NaN', () => {
    expect(imageStatistics({ values: new Float32Array(4).fill(Number.NaN), rows: 2, columns: 2 }, 1).low).toBe(0)
  })
})

describe('the view of an image', () => {
  it('fits the whole image into the middle of the box', () => {
    expect(fitView(1920, 1080, 960, 1080)).toEqual({ scale: 0.5, left: 0, top: 270 })
  })
  it('keeps the point under the pointer when zooming', () => {
    const before = fitView(400, 300, 800, 600)
    const after = zoomView(before, 1.25, 200, 150, 0.1)
    const under = (view: typeof before) => [(200 - view.left) / view.scale, (150 - view.top) / view.scale]
    under(after).forEach((value, index) => expect(value).toBeCloseTo(under(before)[index]!, 9))
  })
  it('stops at the smallest scale', () => {
    expect(zoomView({ scale: 0.3, left: 0, top: 0 }, 0.1, 0, 0, 0.25).scale).toBe(0.25)
  })
})
