import { describe, expect, it } from 'vitest'
import { createLightTable } from '../../jobs/media/transfer'
import type { KnownCodeRange, KnownTransfer } from '../../shared/measurement'
import { numpyFolder } from './numpy'

const { python } = numpyFolder()

/** The published formulas again, in numpy: Rec. ITU-R BT.709-6 item 1.2 and IEC 61966-2-1:1999, ranges by BT.709-6 item 3. */
const theirs = (transfer: KnownTransfer, range: KnownCodeRange, bits: number) => python<number[]>(`
bits = ${bits}; code = np.arange(2 ** bits, dtype=float)
v = (code / 2 ** (bits - 8) - 16) / 219 if '${range}' == 'limited' else code / (2 ** bits - 1)
light = {
  'bt709': lambda v: np.where(v < 0.081, v / 4.5, ((np.maximum(v, 0) + 0.099) / 1.099) ** (1 / 0.45)),
  'srgb': lambda v: np.where(v <= 0.04045, v / 12.92, ((np.maximum(v, 0) + 0.055) / 1.055) ** 2.4),
  'gamma22': lambda v: np.maximum(v, 0) ** 2.2,
  'linear': lambda v: v,
}['${transfer}'](v)
print(json.dumps(np.floor(50000 * np.maximum(light, 0) + 0.5).astype(int).tolist()))`)

describe.each(['bt709', 'srgb', 'gamma22', 'linear'] as KnownTransfer[])('table of %s', (transfer) => {
  it.each([['limited', 8], ['full', 8], ['limited', 10], ['full', 10]] as [KnownCodeRange, number][])('equals the published formula at every code, %s range, %i bits', (range, bits) => {
    expect([...createLightTable(transfer, range, bits).counts]).toEqual(theirs(transfer, range, bits))
  })
})

it('sRGB code 188 is half of white to half a percent, code 119 is 18 % grey to 2 %', () => {
  // Common practice, from memory: the middle of linear light and photographic middle grey in 8-bit sRGB.
  const { counts } = createLightTable('srgb', 'full', 8)
  expect(Math.abs(counts[188] / 25_000 - 1)).toBeLessThan(0.006)
  expect(Math.abs(counts[119] / 9_000 - 1)).toBeLessThan(0.04)
})
