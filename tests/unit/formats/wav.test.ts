import { describe, expect, it } from 'vitest'
import { memorySource, type RandomAccess } from '../../../jobs/formats/randomAccess'
import { readRecord } from '../../../jobs/formats/readRecord'
import { sniffRecord } from '../../../jobs/formats/sniffRecord'
import { wavFile } from './wavFiles'

const samples = [[0.5, -0.5, 0.25, -1], [0, 0.125, -0.125, 0.75]]
const read = (bytes: Uint8Array) => readRecord(memorySource(bytes), { columns: { illumination: 0, force: 1 } })
const values = ({ channels }: Awaited<ReturnType<typeof read>>) => channels.map(({ data }) => Array.from(data))
const codes = ({ flags }: { flags: { code: string }[] }) => flags.map(({ code }) => code)
const error = (code: string, message: RegExp) => expect.objectContaining({ name: 'RecordError', code, message: expect.stringMatching(message) })

describe('WAV record', () => {
  it.each([
    ['RIFF', { container: 'RIFF' }], ['RF64', { container: 'RF64' }], ['BW64', { container: 'BW64' }], ['big-endian RIFX', { container: 'RIFX' }],
    ['24 bits', { bits: 24 }], ['32 bits', { bits: 32 }], ['big-endian 24 bits', { bits: 24, container: 'RIFX' }],
    ['an extensible format', { extensible: true, bits: 24 }], ['other chunks around', { before: [['LIST', 7], ['fact', 4]], after: [['LIST', 20]] }],
  ] as const)('is read with %s', async (_, options) => {
    const record = await read(wavFile({ samples, ...options as object }))
    expect(values(record)).toEqual(samples)
    expect(record).toMatchObject({ sampleRateHz: 48_000, rows: 4, flags: [] })
  })

  it.each([['zero', 0], ['all ones', 0xffffffff], ['too long', 5000]])('whose stated length is %s is read to its end and flagged', async (_, dataLength) => {
    const record = await read(wavFile({ samples, dataLength }))
    expect(values(record)).toEqual(samples)
    expect(codes(record)).toEqual(['wav-length'])
  })

  it('whose stated length is zero is not fooled by samples that look like a chunk’s name', async () => {
    const letters = Array.from({ length: 40 }, () => 0x4241 / 2 ** 15)
    expect((await read(wavFile({ samples: [letters, letters], dataLength: 0 }))).rows).toBe(40)
  })

  it('whose stated length is too short, with no chunk after it, is read to its end and flagged', async () => {
    const loud = [Array.from({ length: 40 }, () => -0.999), Array.from({ length: 40 }, () => -0.999)]
    const record = await read(wavFile({ samples: loud, dataLength: 16 }))
    expect(record.rows).toBe(40)
    expect(codes(record)).toEqual(['wav-length'])
  })

  it('that stops within a sample leaves it out and says so', async () => {
    const bytes = wavFile({ samples })
    const record = await read(bytes.subarray(0, bytes.length - 3))
    expect(record.rows).toBe(3)
    expect(codes(record)).toEqual(expect.arrayContaining(['wav-length', 'last-sample-cut']))
  })

  it('beyond 4 GB is found by its 64-bit length', async () => {
    const head = wavFile({ samples: [[0, 0]], container: 'RF64', dataLength: 6e9, bits: 16 })
    const start = head.length - 4
    const source: RandomAccess = { size: start + 6e9, read: async (offset, length) => {
      const bytes = new Uint8Array(Math.min(length, start + 6e9 - offset))
      if (offset < start) bytes.set(head.subarray(offset, Math.min(start, offset + length)))
      return bytes
    } }
    expect(await sniffRecord(source)).toMatchObject({ rows: 3e9, flags: [], sampleRateHz: 48_000 })
  })

  it.each([
    ['compressed samples', wavFile({ samples, formatTag: 2 }), 'wav-encoding', /format 2 with 16 bits/],
    ['no samples', wavFile({ samples }).subarray(0, 36), 'wav-damaged', /without samples/],
    ['an end within the header', wavFile({ samples }).subarray(0, 30), 'file-cut', /ends at byte 30/],
  ])('is refused with %s', async (_, bytes, code, message) => {
    await expect(read(bytes)).rejects.toThrow(error(code, message))
  })
})
