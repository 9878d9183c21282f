import { describe, expect, it } from 'vitest'
import { addFrame, assertSummable, maximumFramesPerSum, meterFrame, meterHistogram } from '../../../jobs/imaging/accumulate'
import { createLightTable } from '../../../jobs/media/transfer'
import { random } from './pictures'

const table = createLightTable('bt709', 'limited', 8)

describe('sum of frames', () => {
  it('equals a BigInt sum of the same codes, at 8 and at 10 bits', () => {
    for (const bits of [8, 10]) {
      const light = createLightTable('srgb', 'full', bits)
      const next = random(bits)
      const sum = new Uint32Array(200)
      const exact = Array<bigint>(200).fill(0n)
      for (let frame = 0; frame < 500; frame++) {
        const luma = (bits === 8 ? new Uint8Array(200) : new Uint16Array(200)).map(() => Math.floor(next() * 2 ** bits)) as Uint8Array | Uint16Array
        addFrame(sum, luma, light)
        luma.forEach((code, i) => exact[i] += BigInt(light.counts[code]))
      }
      expect([...sum].map(BigInt)).toEqual(exact)
    }
  })

  it('holds 65 536 frames of the brightest code without overflow, and refuses one more', () => {
    const brightest = createLightTable('bt709', 'limited', 10)
    const sum = new Uint32Array(1)
    const luma = Uint16Array.of(1023)
    for (let frame = 0; frame < maximumFramesPerSum; frame++) addFrame(sum, luma, brightest)
    expect(sum[0]).toBe(brightest.counts[1023] * maximumFramesPerSum)
    expect(() => assertSummable(maximumFramesPerSum)).not.toThrow()
    expect(() => assertSummable(maximumFramesPerSum + 1)).toThrow(/65537 frames is too long/)
  })

  it('refuses a frame of another size', () => {
    expect(() => addFrame(new Uint32Array(4), new Uint8Array(5), table)).toThrow(RangeError)
  })
})

describe('meter', () => {
  it('counts light, clipped and black pixels', () => {
    expect(meterFrame(Uint8Array.of(0, 16, 17, 235, 253, 254, 255), table)).toEqual({ counts: table.counts[17] + 50_000 + table.counts[253] + table.counts[254] + table.counts[255], pixels: 7, clipped: 2, black: 2 })
  })

  it('looks at a rectangle only', () => {
    const luma = Uint8Array.from({ length: 24 }, (_, i) => 16 + i)
    const expected = [8, 9, 14, 15].reduce((sum, i) => sum + table.counts[16 + i], 0)
    expect(meterFrame(luma, table, { rectangle: { left: 2, top: 1, width: 2, height: 2 }, frameWidth: 6 })).toEqual({ counts: expected, pixels: 4, clipped: 0, black: 0 })
  })

  it.each([{ left: 5, top: 0, width: 2, height: 1 }, { left: 0, top: 3, width: 1, height: 2 }, { left: -1, top: 0, width: 2, height: 1 }, { left: 0, top: 0, width: 0, height: 1 }])('refuses the rectangle %o that leaves a picture of 6×4', (rectangle) => {
    expect(() => meterFrame(new Uint8Array(24), table, { rectangle, frameWidth: 6 })).toThrow(/lamp patch/)
  })

  it('is exact for a whole 4K frame of the brightest code', () => {
    const histogram = new Uint32Array(256)
    histogram[255] = 3840 * 2160
    expect(meterHistogram(histogram, table).counts).toBe(table.counts[255] * 3840 * 2160)
    expect(Number.isSafeInteger(meterHistogram(histogram, table).counts)).toBe(true)
  })
})
