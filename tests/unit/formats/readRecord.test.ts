import { describe, expect, it } from 'vitest'
import { memorySource, type RandomAccess } from '../../../jobs/formats/randomAccess'
import { readRecord } from '../../../jobs/formats/readRecord'
import type { RecordOptions } from '../../../jobs/formats/recordTable'
import { sniffRecord } from '../../../jobs/formats/sniffRecord'
import { writeNpy } from '../../../jobs/formats/npy'
import { wavFile } from './wavFiles'

const text = (content: string) => memorySource(new TextEncoder().encode(content))
const bytes = (...values: (number | string)[]) => memorySource(Uint8Array.from(values.flatMap(value => typeof value === 'string' ? Array.from(Buffer.from(value, 'latin1')) : [value])))
const error = (code: string, message: RegExp) => expect.objectContaining({ name: 'RecordError', code, message: expect.stringMatching(message) })
const codes = ({ flags }: { flags: { code: string }[] }) => flags.map(({ code }) => code)
const floats = (shape: number[], values: readonly number[]) => memorySource(writeNpy({ dtype: 'float32', shape, data: Float32Array.from(values) }))

describe('a record', () => {
  it('is recognised by its content, whatever its name', async () => {
    const wav = wavFile({ samples: [[0.5, -0.5]] })
    for (const filename of ['a.wav', 'a.csv', 'a', 'a.h5']) {
      expect((await readRecord(memorySource(wav), { filename })).format).toBe('wav')
      expect((await readRecord(text('t,light\n0,1\n1,2\n'), { filename })).format).toBe('csv')
      expect((await readRecord(floats([3], [1, 2, 3]), { filename, sampleRateHz: 1 })).format).toBe('npy')
    }
  })

  it('has the same shape in every format', async () => {
    const keys = (record: object) => Object.keys(record).sort()
    const csv = await readRecord(text('t,light\n0,1\n1,2\n'))
    expect(keys(await readRecord(memorySource(wavFile({ samples: [[0.5, -0.5]] }))))).toEqual(keys(csv))
    expect(keys(csv.columns[0]).slice(0, 4)).toEqual(['header', 'index', 'name', 'unit'])
  })

  it('of many blocks keeps every sample in its place', async () => {
    const { channels } = await readRecord(floats([300_000, 2], Array.from({ length: 600_000 }, (_, i) => i)), { columns: { illumination: 1 }, sampleRateHz: 5 })
    expect(channels[0].data.findIndex((value, i) => value !== 2 * i + 1)).toBe(-1)
  })

  it('of a single channel takes it as illumination, and says so', async () => {
    const record = await readRecord(memorySource(wavFile({ samples: [[0.5, -0.5]] })))
    expect(record.channels.map(({ role }) => role)).toEqual(['illumination'])
    expect(record.flags.find(({ code }) => code === 'columns-guessed')?.message).toMatch(/“channel 1” \(it is the only channel left\)/)
  })

  it('of several channels without names needs to be told', async () => {
    await expect(readRecord(memorySource(wavFile({ samples: [[0.5, -0.5], [0, 0]] })))).rejects.toThrow(error('no-illumination', /2 columns have no header; they count from 0/))
  })

  it('guesses force and acceleration by their units', async () => {
    const record = await readRecord(text('t [s];Ch 1 [V];Ch 2 [N];Ch 3 [g]\n0;1;2;3\n1;2;3;4\n'))
    expect(record.channels.map(({ role, name }) => [role, name])).toEqual([['illumination', 'Ch 1'], ['force', 'Ch 2'], ['acceleration', 'Ch 3']])
  })

  it('without names takes a first column that rises evenly as the time', async () => {
    const rows = Array.from({ length: 20 }, (_, i) => `${(5 + i / 100).toFixed(3)}\t${i * i}`).join('\n')
    expect(await readRecord(text(rows))).toMatchObject({ sampleRateHz: 100, startSeconds: 5, rows: 20 })
    expect(await readRecord(floats([20, 2], Array.from({ length: 40 }, (_, i) => i % 2 ? i * i : i / 8)))).toMatchObject({ sampleRateHz: 4, rows: 20 })
  })
})

describe('sensitivity', () => {
  const columns = 't,light [V],force [mV],acc\n0,1,200,3\n1,2,300,4\n'
  it('turns volts into units, whatever part of a volt the file counts in', async () => {
    const record = await readRecord(text(columns), { sensitivities: { force: 50, acceleration: 10 }, units: { force: 'N', acceleration: 'm/s²' } })
    expect(record.channels.map(({ unit, data }) => [unit, ...data])).toEqual([['V', 1, 2], ['N', 10, 15], ['m/s²', 30, 40]])
    expect(record.flags.find(({ code }) => code === 'volts-assumed')?.message).toMatch(/“acc”/)
  })

  it('scales binary formats alike', async () => {
    const record = await readRecord(memorySource(wavFile({ samples: [[0.5, -0.25], [0.125, 0.5]] })), { columns: { illumination: 0, force: 1 }, sensitivities: { force: 16 }, units: { force: 'N' } })
    expect(Array.from(record.channels[1].data)).toEqual([2, 8])
  })

  it('is refused for a channel that is in units already', async () => {
    await expect(readRecord(text('t,light,force [N]\n0,1,2\n1,2,3\n'), { sensitivities: { force: 50 } })).rejects.toThrow(error('sensitivity-not-volts', /is in N already/))
  })
})

describe('a sniff', () => {
  it('of text shows columns, reasons, rate, rows and a preview from the first kilobytes', async () => {
    const inner = text('t [ms];Light;Force [N];note\n' + Array.from({ length: 100_000 }, (_, i) => `${(i / 2).toFixed(1)};${i % 10};${i % 7}.5;\n`).join(''))
    let total = 0
    const source: RandomAccess = { size: inner.size, read: (offset, length) => {
      total += length
      return inner.read(offset, length)
    } }
    const sniff = await sniffRecord(source, { previewRows: 5 })
    expect(sniff).toMatchObject({ format: 'csv', sampleRateHz: 2000, rowsAreExact: false, needs: null, description: 'Text, 4 columns, semicolons' })
    expect(Math.abs(sniff.rows / 100_000 - 1)).toBeLessThan(0.1)
    expect(sniff.columns.map(({ name, unit, guess }) => [name, unit, guess?.role, guess?.reason])).toEqual([['t', 'ms', 'time', 'its name'], ['Light', null, 'illumination', 'its name'], ['Force', 'N', 'force', 'its name'], ['note', null, undefined, undefined]])
    expect(sniff.preview).toEqual([[0, 0.5, 1, 1.5, 2], [0, 1, 2, 3, 4], [0.5, 1.5, 2.5, 3.5, 4.5], [null, null, null, null, null]])
    expect(total).toBeLessThan(300_000)
  })

  it('says what reading would need', async () => {
    expect((await sniffRecord(text('a;b\n1;2\n3;4\n'))).needs?.code).toBe('no-illumination')
    expect((await sniffRecord(text('light;b\n1;2\n3;4\n'))).needs?.code).toBe('no-time')
    expect((await sniffRecord(text('light;b\n1;2\n3;4\n'), { sampleRateHz: 5 }))).toMatchObject({ needs: null, sampleRateHz: 5, rows: 2, rowsAreExact: true })
    expect((await sniffRecord(text('t;lamp a;lamp b\n0;1;2\n1;3;4\n'))).columns.filter(({ guess }) => guess?.role === 'illumination')).toHaveLength(2)
  })

  it('of a small file counts its rows', async () => {
    for (const end of ['\n', '\r\n']) expect(await sniffRecord(text(`t;light${end}0;1${end}1;3${end}2;4`))).toMatchObject({ rows: 3, rowsAreExact: true, sampleRateHz: 1 })
  })
})

describe('a file is refused', () => {
  it.each([
    ['that is empty', bytes(), 'empty', /Upload the file again/],
    ['that is a spreadsheet', bytes('PK', 3, 4, 20, 0), 'unknown-format', /“x\.dat” is a ZIP archive or a spreadsheet\. .*CSV/],
    ['that is compressed', bytes(0x1f, 0x8b, 8, 0), 'unknown-format', /compressed\. Unpack it/],
    ['that is a video', bytes(0, 0, 0, 0x20, 'ftypisom', 0, 0, 2, 0), 'unknown-format', /Upload it as a clip/],
    ['of another binary format', bytes('XYZ1', 7, 0, 0, 9, 1, 2, 3), 'unknown-format', /byte 5 is zero; it begins with “XYZ1·/],
    ['that is an NPY of text', memorySource(npyOf('<U8', '(3,)', 96)), 'npy-type', /“<U8” is not a channel/],
    ['that is an NPY of complex numbers', memorySource(npyOf('<c16', '(3,)', 48)), 'npy-type', /float32/],
    ['that is an NPY of three dimensions', memorySource(npyOf('<f4', '(3, 4, 5)', 240)), 'npy-shape', /3 dimensions/],
    ['that is an NPY of an image', memorySource(npyOf('<f4', '(5000, 6000)', 8)), 'npy-shape', /5000 channels/],
    ['that is an NPY cut off', memorySource(npyOf('<f4', '(30,)', 100)), 'file-cut', /ends at byte 228, but .* ends at byte 248/],
    ['that is an NPY with a damaged header', bytes('\x93NUMPY', 1, 0, 10, 0, '{\'descr\': ['), 'npy-header', /does not say type and shape/],
    ['that is an NPY of a million fields', memorySource(npyOf('<f4', '(3,)', 8, '[(\'a\', \'<f4\', (1000000,))]')), 'npy-shape', /more than 4096 fields/],
    ['that is an NPY whose data begin in nested brackets', memorySource(npyOf('', '(3,)', 8, '['.repeat(50_000))), 'npy-header', /does not say type/],
    ['whose NPY holds no numbers', floats([3], [1, Number.NaN, 3]), 'not-a-number', /Sample 1 of “channel 1” \(counted from 0\) is no number/],
    ['whose NPY holds one sample', floats([1], [1]), 'too-short', /one sample/],
  ] as [string, RandomAccess, string, RegExp][])('%s', async (_, source, code, message) => {
    await expect(readRecord(source, { filename: 'x.dat', sampleRateHz: 5 })).rejects.toThrow(error(code, message))
  })

  it('with no rate anywhere', async () => {
    await expect(readRecord(floats([3], [1, 2, 4]))).rejects.toThrow(error('no-time', /sample rate in Hz/))
  })
})

it('a rate that was given goes before the file’s own, and a difference is told', async () => {
  const options: RecordOptions = { sampleRateHz: 1000 }
  expect(codes(await readRecord(memorySource(wavFile({ samples: [[0, 1]], sampleRateHz: 1000 })), options))).not.toContain('sample-rate-differs')
  const record = await readRecord(memorySource(wavFile({ samples: [[0, 0.5]], sampleRateHz: 48_000 })), options)
  expect(record.sampleRateHz).toBe(1000)
  expect(record.flags.find(({ code }) => code === 'sample-rate-differs')?.message).toMatch(/file says 48000 Hz/)
})

function npyOf(descr: string, shape: string, dataBytes: number, literal = `'${descr}'`): Uint8Array {
  const header = `{'descr': ${literal}, 'fortran_order': False, 'shape': ${shape}, }`.padEnd(117) + '\n'
  return Uint8Array.from([...Buffer.from('\x93NUMPY\x01\x00', 'latin1'), header.length & 0xff, header.length >> 8, ...Buffer.from(header), ...new Uint8Array(dataBytes)])
}
