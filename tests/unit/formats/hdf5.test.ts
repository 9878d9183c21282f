import type { File, Group } from 'h5wasm'
import { describe, expect, it } from 'vitest'
import { memorySource, type RandomAccess } from '../../../jobs/formats/randomAccess'
import { readRecord } from '../../../jobs/formats/readRecord'
import { sniffRecord } from '../../../jobs/formats/sniffRecord'
import { hdf5Bytes } from './hdf5Files'

const wave = (count: number, step = 0.1) => Float32Array.from({ length: count }, (_, i) => Math.sin(step * i))
const error = (code: string, message: RegExp) => expect.objectContaining({ name: 'RecordError', code, message: expect.stringMatching(message) })

/** Counts bytes; can only be read by waiting when `slow`. */
function counted(bytes: Uint8Array, slow = false): RandomAccess & { total: () => number } {
  let total = 0
  const readSync = (offset: number, length: number) => {
    total += length
    return bytes.subarray(offset, offset + length)
  }
  return { size: bytes.length, read: async (offset, length) => readSync(offset, length), total: () => total, ...!slow && { readSync } }
}

function laboratory(file: File) {
  const daq = file.create_group('daq')
  daq.create_attribute('sample_rate', 51200)
  daq.create_dataset({ name: 'lamp', data: wave(5000), shape: [5000] }).create_attribute('units', 'V')
  daq.create_dataset({ name: 'force', data: Float64Array.from(wave(5000, 0.3)), shape: [5000], dtype: '<d', chunks: [512], compression: 4 }).create_attribute('unit', 'N')
  file.create_dataset({ name: 'note', data: 'made by hand' })
}

describe('HDF5 record', () => {
  it.each([['in slices', false], ['from memory', true]])('is read %s, with rate and units from attributes', async (_, slow) => {
    const record = await readRecord(counted(await hdf5Bytes(laboratory), slow))
    expect(record).toMatchObject({ format: 'hdf5', sampleRateHz: 51200, rows: 5000 })
    expect(record.channels.map(({ role, name, unit }) => ({ role, name, unit }))).toEqual([{ role: 'illumination', name: 'daq/lamp', unit: 'V' }, { role: 'force', name: 'daq/force', unit: 'N' }])
    expect(record.channels.map(({ data }) => data)).toEqual([wave(5000), wave(5000, 0.3)])
  })

  it.each([
    ['[samples, channels]', [4000, 3], null],
    ['[channels, samples]', [3, 4000], null],
    ['[samples, channels] in compressed chunks', [4000, 3], [700, 2]],
    ['[channels, samples] in compressed chunks', [3, 4000], [1, 333]],
  ] as [string, [number, number], number[] | null][])('holds channels of a dataset %s', async (_, shape, chunks) => {
    const value = (channel: number, i: number) => 10_000 * channel + i
    const data = Int16Array.from({ length: 12_000 }, (_value, at) => shape[0] === 3 ? value(Math.floor(at / 4000), at % 4000) : value(at % 3, Math.floor(at / 3)))
    const bytes = await hdf5Bytes((file) => {
      const dataset = file.create_dataset({ name: 'data', data, shape, dtype: '<h', ...chunks && { chunks, compression: 4 } })
      dataset.create_attribute('channel_names', ['Photodiode', 'spare', 'Shaker force'])
      dataset.create_attribute('units', ['mV', '', 'N'])
      dataset.create_attribute('dt', 1 / 2000)
    })
    const record = await readRecord(counted(bytes), { units: { force: 'kN' } })
    expect(record).toMatchObject({ sampleRateHz: 2000, rows: 4000 })
    expect(record.columns.map(({ name, unit }) => [name, unit])).toEqual([['Photodiode', 'mV'], ['spare', null], ['Shaker force', 'N']])
    expect(record.channels.map(({ unit }) => unit)).toEqual(['mV', 'kN'])
    expect(record.channels.map(({ data: values }) => Array.from(values.subarray(3990)))).toEqual([0, 2].map(channel => Array.from({ length: 10 }, (_value, i) => value(channel, 3990 + i))))
  })

  it('takes a time dataset, and integers of eight bytes', async () => {
    const record = await readRecord(counted(await hdf5Bytes((file) => {
      file.create_dataset({ name: 'time', data: Float64Array.from({ length: 3000 }, (_, i) => 5 + i / 400), shape: [3000], dtype: '<d' })
      file.create_dataset({ name: 'light', data: BigInt64Array.from({ length: 3000 }, (_, i) => BigInt(i)), shape: [3000], dtype: '<q' })
    })))
    expect(record).toMatchObject({ sampleRateHz: 400, startSeconds: 5 })
    expect(record.channels[0].data[2999]).toBe(2999)
  })

  it('is sniffed, with every dataset listed, without reading it whole', async () => {
    const bytes = await hdf5Bytes((file) => {
      laboratory(file)
      file.create_dataset({ name: 'camera', data: new Float32Array(500_000), shape: [500_000] })
    })
    const source = counted(bytes)
    const sniff = await sniffRecord(source, { previewRows: 3 })
    expect(sniff.columns.map(({ name, guess }) => [name, guess?.role ?? null])).toEqual(expect.arrayContaining([['daq/lamp', 'illumination'], ['daq/force', 'force'], ['camera', null]]))
    expect(sniff).toMatchObject({ format: 'hdf5', needs: null, sampleRateHz: 51200 })
    expect(sniff.preview[sniff.columns.findIndex(({ name }) => name === 'daq/lamp')]).toEqual(Array.from(wave(3)))
    expect(source.total()).toBeLessThan(bytes.length / 10)
  })

  it('behind a user block is recognised', async () => {
    const bytes = await hdf5Bytes(laboratory)
    const moved = new Uint8Array(512 + bytes.length)
    moved.set(bytes, 512)
    expect((await sniffRecord(counted(moved))).format).toBe('hdf5')
  })

  it('is refused when cut off, and when it holds no numbers', async () => {
    const bytes = await hdf5Bytes(laboratory)
    await expect(readRecord(counted(bytes.subarray(0, bytes.length - 200)))).rejects.toThrow(error('hdf5-damaged', /truncated file.*Copy it again/))
    await expect(readRecord(memorySource(await hdf5Bytes(file => void file.create_dataset({ name: 'text', data: ['a', 'b'] }))))).rejects.toThrow(error('hdf5-empty', /only “text”/))
  })

  it('that claims more samples than memory holds is refused before any is read', async () => {
    const bytes = await hdf5Bytes(file => void file.create_dataset({ name: 'lamp', data: new Float32Array(10), shape: [10], maxshape: [null], chunks: [10] }).resize([5_000_000_000]))
    await expect(readRecord(counted(bytes), { sampleRateHz: 10 })).rejects.toThrow(error('too-long', /5000000000 samples a channel/))
  })

  it('cannot reach files beside it through links', async () => {
    const other = await hdf5Bytes((file) => {
      const group: Group = file.create_group('a')
      group.create_external_link('/etc/hostname', '/', 'outside')
      group.create_soft_link('/a', 'loop')
      file.create_dataset({ name: 'lamp', data: wave(50), shape: [50] })
    })
    expect((await readRecord(counted(other), { sampleRateHz: 10 })).columns.map(({ name }) => name)).toEqual(['lamp'])
  })
})
