import { describe, expect, it } from 'vitest'
import { memorySource, type RandomAccess } from '../../../jobs/formats/randomAccess'
import { readRecord } from '../../../jobs/formats/readRecord'
import type { RecordOptions } from '../../../jobs/formats/recordTable'
import { sniffRecord } from '../../../jobs/formats/sniffRecord'
import { universalFile, type UffChannel } from './uffFiles'

const wave = (count: number, phase = 0) => Array.from({ length: count }, (_, i) => Math.sin(0.1 * i + phase) * 10 ** (i % 7 - 3))
const read = (bytes: Uint8Array, options?: RecordOptions) => readRecord(memorySource(bytes), options)
const error = (code: string, message: RegExp) => expect.objectContaining({ name: 'RecordError', code, message: expect.stringMatching(message) })
const single = (values: readonly number[]) => Array.from(Float32Array.from(values))
const written = (values: readonly number[], digits: number) => single(values.map(value => Number(value.toExponential(digits))))

const units = `    -1
   164
         1SI: Meter (newton)         2
  1.00000000000000000D+00  1.00000000000000000D+00  1.00000000000000000D+00
  2.73160000000000000D+02
    -1
`
const lamp = (extra: Partial<UffChannel> = {}): UffChannel => ({ title: 'Lamp', label: 'Voltage', unit: 'V', values: wave(1000), step: 1 / 51200, ...extra })
const force = (extra: Partial<UffChannel> = {}): UffChannel => ({ title: 'NONE', node: 12, direction: 3, label: 'Excitation', unit: 'N', dataType: 13, values: wave(1000, 1), step: 1 / 51200, ...extra })

describe('universal file', () => {
  it.each([
    ['ASCII, single precision', {}, 5],
    ['ASCII, double precision', { isDouble: true }, 12],
    ['binary, single precision, little-endian', { binary: 'little' }, 17],
    ['binary, single precision, big-endian', { binary: 'big' }, 17],
    ['binary, double precision, little-endian', { binary: 'little', isDouble: true }, 17],
    ['binary, double precision, big-endian', { binary: 'big', isDouble: true }, 17],
  ] as [string, Partial<UffChannel>, number][])('is read as %s, each dataset a channel', async (_, extra, digits) => {
    const record = await read(universalFile([lamp(extra), force(extra)], { before: units }))
    expect(record).toMatchObject({ format: 'uff58', sampleRateHz: 51200, startSeconds: 0, rows: 1000 })
    expect(record.channels.map(({ role, name, unit }) => ({ role, name, unit }))).toEqual([{ role: 'illumination', name: 'Lamp', unit: 'V' }, { role: 'force', name: 'Excitation 12+Z', unit: 'N' }])
    expect(record.channels.map(({ data }) => Array.from(data))).toEqual([written(wave(1000), digits), written(wave(1000, 1), digits)])
  })

  it.each([
    ['ASCII, single precision', {}],
    ['ASCII, double precision', { isDouble: true }],
    ['binary, single precision', { binary: 'little' }],
    ['binary, double precision, four-byte abscissa', { binary: 'big', isDouble: true }],
    ['binary, double precision, eight-byte abscissa', { binary: 'big', isDouble: true, wideAbscissa: true }],
  ] as [string, Partial<UffChannel>][])('with abscissa values is read as %s', async (_, extra) => {
    const times = Array.from({ length: 999 }, (_value, i) => 2 + i / 125)
    const values = wave(999).map(value => Number(value.toExponential(5)))
    const record = await read(universalFile([lamp({ ...extra, times, values }), force({ ...extra, times, values })]))
    expect(record).toMatchObject({ startSeconds: 2, rows: 999 })
    expect(record.sampleRateHz).toBeCloseTo(125, 4)
    expect(record.channels.map(({ data }) => Array.from(data))).toEqual([single(values), single(values)])
  })

  it('whose abscissa is truly uneven is refused by sample', async () => {
    const times = Array.from({ length: 300 }, (_, i) => i / 100 + (i > 200 ? 0.5 : 0))
    await expect(read(universalFile([lamp({ times, values: wave(300) })]))).rejects.toThrow(error('time-not-uniform', /at sample 201 the time steps/))
  })

  it('with Windows line ends, trimmed lines, and numbers that touch each other is read', async () => {
    const values = Array.from({ length: 50 }, (_, i) => -1e-5 * (i + 1))
    const expected = written(values, 5)
    const windows = universalFile([lamp({ values })], { end: '\r\n' })
    expect(Array.from((await read(windows)).channels[0].data)).toEqual(expected)
    const text = new TextDecoder().decode(universalFile([lamp({ values }), force({ values })])).split('\n').map(line => line.trimEnd()).join('\n')
    expect((await read(new TextEncoder().encode(text))).channels.map(({ data }) => Array.from(data))).toEqual([expected, expected])
    const wide = text.replaceAll(/-(\d)\.(\d{5})E-0(\d)/g, '-$1.$2E-00$3').replaceAll(' -', '-')
    expect(Array.from((await read(new TextEncoder().encode(wide))).channels[0].data)).toEqual(expected)
  })

  it('whose numbers touch in some places of a line only is read', async () => {
    const values = Array.from({ length: 50 }, (_, i) => (i % 3 === 2 ? -1e-5 : 1e-5) * (i + 1))
    const text = new TextDecoder().decode(universalFile([lamp({ values })])).replaceAll(/[- ](\d)\.(\d{5})E-0(\d)/g, found => found.replace('E-', 'E-0')).replaceAll(/ ([ -]\d\.\d{5}E-00)/g, '$1')
    expect(text).toContain('E-005-3.')
    expect(Array.from((await read(new TextEncoder().encode(text))).channels[0].data)).toEqual(written(values, 5))
  })

  it('in free form, one number a line, is read with its abscissa', async () => {
    const values = wave(100_000).map(value => Number(value.toExponential(5)))
    const times = values.map((_value, i) => i / 8)
    const [head] = new TextDecoder().decode(universalFile([lamp({ times, values })])).split(/(?<=\n.{9}0 {4}0 {4}0 {4}0 NONE {16} NONE {16}\n.*\n)/)
    const bytes = new TextEncoder().encode(`${head}${values.map((value, i) => `${times[i]}\n${value}\n`).join('')}    -1\n`)
    const record = await read(bytes)
    expect(record).toMatchObject({ sampleRateHz: 8, rows: 100_000 })
    expect(Array.from(record.channels[0].data)).toEqual(single(values))
  })

  it('passes over datasets of other kinds and functions that are no time histories, and says so', async () => {
    const spectrum = force({ abscissaType: 18, functionType: 4, isComplex: true, values: wave(20) })
    const record = await read(universalFile([spectrum, lamp()], { before: units }))
    expect(record.columns.map(({ name }) => name)).toEqual(['Lamp'])
    expect(record.flags.map(({ code }) => code)).toContain('datasets-passed-over')
    await expect(read(universalFile([spectrum]))).rejects.toThrow(error('uff-no-channels', /1 functions of other kinds/))
  })

  it.each([[51200, '1.95313'], [65536, '1.52588'], [48000, '2.08333'], [44100, '2.26757'], [1000 / 3, '3.00000']])('has the rate %d Hz though its step is written as %s…', async (rate, digits) => {
    const bytes = universalFile([lamp({ step: 1 / rate })])
    expect(new TextDecoder().decode(bytes)).toContain(digits)
    expect((await read(bytes)).sampleRateHz / rate).toBeCloseTo(1, rate < 1000 ? 5 : 12)
  })

  it('is sniffed by its headers alone', async () => {
    let total = 0
    const inner = memorySource(universalFile([lamp({ values: wave(200_000) }), force({ values: wave(200_000) })]))
    const source: RandomAccess = { size: inner.size, read: (offset, length) => {
      total += Math.min(length, inner.size - offset)
      return inner.read(offset, length)
    } }
    const sniff = await sniffRecord(source, { previewRows: 10 })
    expect(sniff).toMatchObject({ format: 'uff58', rows: 200_000, sampleRateHz: 51200, needs: null })
    expect(sniff.columns.map(({ guess }) => guess)).toEqual([{ role: 'illumination', reason: 'its name' }, { role: 'force', reason: 'its data type, excitation force' }])
    expect(sniff.preview[0]).toEqual(wave(10).map(value => Number(value.toExponential(5))))
    expect(total).toBeLessThan(inner.size)
  })

  it('with channels of different rates or starts is refused, of different lengths cut to the shortest', async () => {
    await expect(read(universalFile([lamp(), force({ step: 1e-3 })]))).rejects.toThrow(error('rates-differ', /“Lamp” at 51200 Hz, “Excitation 12\+Z” at 1000 Hz/))
    await expect(read(universalFile([lamp(), force({ first: 1 })]))).rejects.toThrow(error('starts-differ', /at 0 s.*at 1 s/))
    const record = await read(universalFile([lamp(), force({ values: wave(900) })]))
    expect(record.rows).toBe(900)
    expect(record.flags.map(({ code }) => code)).toContain('lengths-differ')
  })

  it.each([
    ['that is cut off in ASCII data', universalFile([lamp()]).subarray(0, 9000), 'file-cut', /ends after \d+ of 1000 numbers/],
    ['that is cut off in binary data', universalFile([lamp({ binary: 'little' })]).subarray(0, 3000), 'file-cut', /ends at byte 3000, but .* reach to byte/],
    ['that is cut off in its header', universalFile([lamp()]).subarray(0, 200), 'file-cut', /within the header/],
    ['with a damaged header', new TextEncoder().encode(new TextDecoder().decode(universalFile([lamp()])).replace(/ {9}2 {6}1000/, '   seven      1000')), 'uff-header', /header line 7 .* reads “seven/],
    ['with a word among its numbers', new TextEncoder().encode(new TextDecoder().decode(universalFile([lamp()])).replace(/(\n[^\n]{26})[^\n]{13}(?=[^\n]{39}\n)/g, '$1     overload')), 'not-a-number', /At byte \d+ .*“overload/],
    ['with numbers that are not IEEE', new TextEncoder().encode(new TextDecoder().decode(universalFile([lamp({ binary: 'little' })])).replace('58b     1     2', '58b     1     1')), 'uff-float', /format 1/],
  ] as [string, Uint8Array, string, RegExp][])('is refused %s', async (_, bytes, code, message) => {
    await expect(read(bytes)).rejects.toThrow(error(code, message))
  })
})
