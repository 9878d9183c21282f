import { describe, expect, it } from 'vitest'
import { codeScale, decodeSignal, encodeLight } from '../../support/forward'
import { makeQuantiser } from '../../support/forward/camera'
import { seededRandom } from '../../support/forward/random'

describe('camera of the forward model', () => {
  it('has the transfer of Rec. ITU-R BT.709-6 item 1.2 and of IEC 61966-2-1 (worked out by hand from their formulas)', () => {
    expect(encodeLight(0.01, 'bt709')).toBeCloseTo(0.045, 12)
    expect(encodeLight(1, 'bt709')).toBeCloseTo(1, 12)
    // 0.18^0.45 = e^{0.45·ln 0.18} = 0.46224
    expect(encodeLight(0.18, 'bt709')).toBeCloseTo(1.099 * 0.46224 - 0.099, 4)
    expect(encodeLight(0.002, 'srgb')).toBeCloseTo(0.02584, 12)
    // 0.214041^(1/2.4) = 0.52607: the mid grey whose sRGB signal is one half
    expect(encodeLight(0.214041, 'srgb')).toBeCloseTo(0.5, 5)
  })

  it.each(['bt709', 'srgb', 'linear', 'gamma22'] as const)('decodes what it encodes: %s', (transfer) => {
    for (let light = 0; light <= 1.1; light += 0.01) expect(decodeSignal(encodeLight(light, transfer), transfer)).toBeCloseTo(light, transfer === 'bt709' ? 3 : 6)
  })

  it('places black and white as Rec. ITU-T H.273 does', () => {
    expect(codeScale('limited', 8)).toEqual({ black: 16, span: 219, highest: 255 })
    expect(codeScale('limited', 10)).toEqual({ black: 64, span: 876, highest: 1023 })
    expect(codeScale('full', 8)).toEqual({ black: 0, span: 255, highest: 255 })
  })

  it.each([['bt709', 'limited', 8], ['srgb', 'full', 8], ['bt709', 'limited', 10], ['linear', 'full', 10], ['gamma22', 'limited', 8]] as const)('rounds to the nearest code: %s, %s, %i bits', (transfer, range, bitDepth) => {
    const uniform = seededRandom(4)
    const light = Float64Array.from({ length: 50_000 }, () => uniform() * 1.5 - 0.02)
    const codes = new Uint16Array(light.length)
    makeQuantiser({ transfer, range, bitDepth })(light, codes)
    const { black, span, highest } = codeScale(range, bitDepth)
    light.forEach((value, i) => {
      const ideal = Math.max(0, Math.min(highest, black + span * encodeLight(value, transfer)))
      // The two pieces of BT.709 miss each other by 10⁻⁴ at their joint.
      expect(Math.abs(codes[i]! - ideal)).toBeLessThan(0.5 + (transfer === 'bt709' ? 2e-4 * span : 1e-6))
    })
  })
})
