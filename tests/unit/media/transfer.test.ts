import { describe, expect, it } from 'vitest'
import { maximumFramesPerSum } from '../../../jobs/imaging/accumulate'
import { codeLimits, countsPerWhite, createLightTable } from '../../../jobs/media/transfer'
import type { KnownCodeRange, KnownTransfer } from '../../../shared/measurement'

/** Forward transfers as the standards print them: light to signal. */
const forward: Record<KnownTransfer, (light: number) => number> = {
  bt709: light => light < 0.018 ? 4.5 * light : 1.099 * light ** 0.45 - 0.099, // Rec. ITU-R BT.709-6 item 1.2
  srgb: light => light <= 0.0031308 ? 12.92 * light : 1.055 * light ** (1 / 2.4) - 0.055, // IEC 61966-2-1:1999
  gamma22: light => light ** (1 / 2.2),
  linear: light => light,
}
const transfers = Object.keys(forward) as KnownTransfer[]
const ranges: KnownCodeRange[] = ['limited', 'full']

describe('light table', () => {
  it.each(transfers.flatMap(transfer => ranges.flatMap(range => [8, 10].map(bits => [transfer, range, bits] as const))))('%s, %s, %i bits: the standard’s forward curve leads back to every code', (transfer, range, bits) => {
    const { counts } = createLightTable(transfer, range, bits)
    const { black, white, highest } = codeLimits(range, bits)
    expect(counts.length).toBe(2 ** bits)
    for (let code = black; code <= highest; code++) {
      const signal = (code - black) / (white - black)
      const [least, most] = [-0.5, 0.5].map(half => forward[transfer](Math.max(0, counts[code] + half) / countsPerWhite))
      // As printed, the two branches of BT.709 miss each other by 0.0002 of signal.
      expect(signal).toBeGreaterThan(least - 2.2e-4)
      expect(signal).toBeLessThan(most + 2.2e-4)
    }
  })

  it('has nominal black and white of limited range at codes 16 and 235, times four at 10 bits', () => {
    const eight = createLightTable('bt709', 'limited', 8).counts
    expect([eight[0], eight[15], eight[16], eight[235]]).toEqual([0, 0, 0, 50_000])
    expect(eight[17]).toBeGreaterThan(0)
    const ten = createLightTable('bt709', 'limited', 10).counts
    expect([ten[63], ten[64], ten[940]]).toEqual([0, 0, 50_000])
  })

  it('keeps codes above white: about 59 700 counts at code 255', () => {
    expect(createLightTable('bt709', 'limited', 8).counts[255]).toBeGreaterThan(59_650)
    expect(createLightTable('bt709', 'limited', 8).counts[255]).toBeLessThan(59_750)
  })

  it('gives half signal 25.96 % of white by BT.709 and 21.40 % by sRGB', () => {
    // Signal 0.5 is code 502 at 10 bits limited. sRGB's 0.2140 from memory; BT.709's by its formula.
    expect(createLightTable('bt709', 'limited', 10).counts[502] / countsPerWhite).toBeCloseTo((0.599 / 1.099) ** (1 / 0.45), 4)
    expect(createLightTable('srgb', 'limited', 10).counts[502] / countsPerWhite).toBeCloseTo(0.2140, 4)
  })

  it('lets every table be added for 65 536 frames within a uint32', () => {
    for (const transfer of transfers) for (const range of ranges) for (const bits of [8, 10]) expect(Math.max(...createLightTable(transfer, range, bits).counts) * maximumFramesPerSum).toBeLessThan(2 ** 32)
  })

  it('counts black and below as black, the top code and the one below as clipped', () => {
    expect(createLightTable('bt709', 'limited', 8)).toMatchObject({ blackUpTo: 16, clippedFrom: 254 })
    expect(createLightTable('bt709', 'full', 10)).toMatchObject({ blackUpTo: 0, clippedFrom: 1016 })
    expect(createLightTable('bt709', 'limited', 8, 235).clippedFrom).toBe(235)
  })

  it('refuses 12 bits', () => {
    expect(() => createLightTable('bt709', 'limited', 12)).toThrow(/12 bits/)
  })
})
