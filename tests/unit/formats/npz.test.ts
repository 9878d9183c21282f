import { createHash } from 'node:crypto'
import { crc32 as nodeCrc32 } from 'node:zlib'
import { describe, expect, it } from 'vitest'
import { crc32 } from '../../../jobs/formats/crc32'
import { readNpy, readNpyHeader, writeNpy, type NpyArray } from '../../../jobs/formats/npy'
import { npzChunks, openNpz, readNpz, writeNpz } from '../../../jobs/formats/npz'

const arrays: Record<string, NpyArray> = {
  sums: { dtype: 'uint32', shape: [2, 3, 4], data: Uint32Array.from({ length: 24 }, (_, i) => 2 ** 32 - 1 - i) },
  role: { dtype: 'int32', shape: [3], data: Int32Array.of(-1, 0, 2) },
  accepted: { dtype: 'uint8', shape: [3], data: Uint8Array.of(1, 0, 1) },
  scene: { dtype: 'float32', shape: [2, 2], data: Float32Array.of(1.5, Number.NaN, -0, 1e-30) },
  frequency_hz: { dtype: 'float64', shape: [], data: Float64Array.of(Math.PI) },
  force: { dtype: 'complex128', shape: [], data: Float64Array.of(3, -4) },
  ux: { dtype: 'complex64', shape: [1, 2], data: Float32Array.of(1, 2, 3, 4) },
  none: { dtype: 'float64', shape: [0], data: new Float64Array(0) },
}

async function collect(chunks: AsyncIterable<Uint8Array>): Promise<Uint8Array> {
  const parts: Uint8Array[] = []
  for await (const chunk of chunks) parts.push(chunk.slice())
  return Buffer.concat(parts)
}

describe('NPY', () => {
  it.each(Object.entries(arrays))('%s comes back as it was written', (_, array) => {
    expect(readNpy(writeNpy(array))).toEqual(array)
  })

  it('has data at a multiple of 64 bytes and the header of the format’s description', () => {
    const bytes = writeNpy(arrays.sums)
    expect(Buffer.from(bytes.subarray(0, 8)).toString('latin1')).toBe('\x93NUMPY\x01\x00')
    expect(Buffer.from(bytes.subarray(10, 128)).toString('latin1')).toMatch(/^\{'descr': '<u4', 'fortran_order': False, 'shape': \(2, 3, 4\), \} *\n$/)
    expect(readNpyHeader(bytes)).toEqual({ dtype: 'uint32', shape: [2, 3, 4], dataOffset: 128, dataBytes: 96 })
  })

  it('is read from any position in memory', () => {
    const bytes = new Uint8Array(writeNpy(arrays.frequency_hz).length + 3)
    bytes.set(writeNpy(arrays.frequency_hz), 3)
    expect(readNpy(bytes.subarray(3))).toEqual(arrays.frequency_hz)
  })

  it('refuses what it cannot hold', () => {
    const header = (text: string) => Uint8Array.from(Buffer.from(`\x93NUMPY\x01\x00${String.fromCharCode(text.length)}\x00${text}`, 'latin1'))
    expect(() => writeNpy({ dtype: 'uint8', shape: [2], data: new Uint8Array(3) })).toThrow(/needs 2 bytes, not 3/)
    expect(() => readNpy(Uint8Array.from(Buffer.from('t;light\n0;1\n1;2')))).toThrow(/not an NPY file/)
    expect(() => readNpy(writeNpy(arrays.sums).subarray(0, 150))).toThrow(/22 of 96 bytes/)
    expect(() => readNpy(header('{\'descr\': \'>f8\', \'fortran_order\': False, \'shape\': (1,), }\n'))).toThrow(/>f8 is not supported/)
    expect(() => readNpy(header('{\'descr\': \'<f8\', \'fortran_order\': True, \'shape\': (1, 2), }\n'))).toThrow(/Fortran order/)
    expect(() => readNpy(header('{\'descr\': [(\'a\', \'<f8\')], \'fortran_order\': False, \'shape\': (1,), }\n'))).toThrow(/structured array/)
  })
})

describe('NPZ', () => {
  it('comes back as it was written, with and without 64-bit records', () => {
    expect(readNpz(writeNpz(arrays))).toEqual(arrays)
    expect(readNpz(writeNpz(arrays, { zip64: true }))).toEqual(arrays)
  })

  it('has the same bytes on every run, whole or in chunks', async () => {
    // A stored hash: a change of the bytes would change the checksum of every frame set.
    expect(createHash('sha256').update(writeNpz({ role: arrays.role, frequency_hz: arrays.frequency_hz })).digest('hex')).toBe('5068cf08024884de90b4fa5b664ec875306e5ad513dc602332c357c2ba9b875a')
    expect(await collect(npzChunks(arrays))).toEqual(Buffer.from(writeNpz(arrays)))
    expect(await collect(npzChunks(arrays, { zip64: true }))).toEqual(Buffer.from(writeNpz(arrays, { zip64: true })))
  })

  it('takes an array in pieces that is never in memory at once', async () => {
    const whole = new Uint8Array(arrays.sums.data.buffer)
    const lazy = { dtype: 'uint32' as const, shape: [2, 3, 4], chunks: async function* () {
      for (let at = 0; at < whole.length; at += 7) yield whole.subarray(at, at + 7)
    } }
    expect(readNpz(await collect(npzChunks({ sums: lazy })))).toEqual({ sums: arrays.sums })
    await expect(collect(npzChunks({ sums: { ...lazy, shape: [2, 3, 5] } }))).rejects.toThrow(/gave 96 bytes of the 120/)
  })

  it.each([false, true])('gives one member without reading the others (64-bit records: %s)', async (zip64) => {
    const large = new Uint8Array(1_000_000)
    const bytes = writeNpz({ before: { dtype: 'uint8', shape: [large.length], data: large }, role: arrays.role, sums: arrays.sums }, { zip64 })
    let read = 0
    const npz = await openNpz(bytes.length, async (offset, length) => {
      read += length
      return bytes.subarray(offset, offset + length)
    })
    expect(npz.names).toEqual(['before', 'role', 'sums'])
    expect(await npz.array('role')).toEqual(arrays.role)
    const { dataOffset, dataBytes, shape } = await npz.locate('sums')
    expect({ shape, data: new Uint32Array(bytes.slice(dataOffset, dataOffset + dataBytes).buffer) }).toEqual({ shape: [2, 3, 4], data: arrays.sums.data })
    expect(read).toBeLessThan(10_000)
    await expect(npz.array('missing')).rejects.toThrow(/no array “missing”, only before, role, sums/)
  })

  it('refuses what is not an archive of its kind', async () => {
    expect(() => readNpz(new Uint8Array(5))).toThrow(/not an NPZ file/)
    expect(() => readNpz(writeNpz(arrays).subarray(0, 900))).toThrow(/not an NPZ file, or it ends early/)
    await expect(openNpz(10, async (_, length) => new Uint8Array(length))).rejects.toThrow(/not an NPZ file/)
  })
})

it('CRC-32 equals that of zlib, in one go and in pieces', () => {
  const bytes = Uint8Array.from({ length: 1003 }, (_, i) => (i * 151 + (i >> 3)) & 0xff)
  for (const length of [0, 1, 7, 8, 9, 64, 1003]) expect(crc32(bytes.subarray(0, length))).toBe(nodeCrc32(bytes.subarray(0, length)))
  expect(crc32(bytes.subarray(13), crc32(bytes.subarray(0, 13)))).toBe(nodeCrc32(bytes))
})
