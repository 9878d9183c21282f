import { describe, expect, it } from 'vitest'
import { resolveRange, resolveTransfer } from '../../../jobs/media/colour'

describe('transfer', () => {
  it.each([['bt709', 'bt709'], ['smpte170m', 'bt709'], ['bt2020-10', 'bt709'], ['iec61966-2-1', 'srgb'], ['linear', 'linear'], ['gamma22', 'gamma22']])('%s of Rec. ITU-T H.273 is %s', (declared, value) => {
    expect(resolveTransfer('auto', declared)).toEqual({ value, source: 'stream', flags: [] })
  })

  it('is assumed to be BT.709, with a flag, when the clip declares none', () => {
    expect(resolveTransfer('auto', undefined)).toMatchObject({ value: 'bt709', source: 'assumed', flags: [{ code: 'transfer-assumed' }] })
  })

  it('follows the setting, and warns when the clip says otherwise', () => {
    expect(resolveTransfer('srgb', 'iec61966-2-1')).toEqual({ value: 'srgb', source: 'setting', flags: [] })
    expect(resolveTransfer('linear', 'bt709')).toMatchObject({ value: 'linear', source: 'setting', flags: [{ code: 'transfer-differs', severity: 'warning' }] })
    expect(resolveTransfer('gamma22', 'smpte2084').value).toBe('gamma22')
  })

  it('is refused when the clip declares a curve that cannot be inverted here', () => {
    expect(() => resolveTransfer('auto', 'smpte2084')).toThrow(expect.objectContaining({ code: 'transfer-unsupported' }))
  })
})

describe('range', () => {
  it('comes from the stream, else is limited, but full for grey', () => {
    expect(resolveRange('auto', 'pc', false)).toEqual({ value: 'full', source: 'stream', flags: [] })
    expect(resolveRange('auto', 'tv', false)).toEqual({ value: 'limited', source: 'stream', flags: [] })
    expect(resolveRange('auto', undefined, false)).toMatchObject({ value: 'limited', source: 'assumed', flags: [{ code: 'range-assumed' }] })
    expect(resolveRange('auto', undefined, true)).toMatchObject({ value: 'full', source: 'assumed' })
  })

  it('follows the setting, and warns when the clip says otherwise', () => {
    expect(resolveRange('limited', 'pc', false)).toMatchObject({ value: 'limited', source: 'setting', flags: [{ code: 'range-differs' }] })
  })
})
