import { execFileSync } from 'node:child_process'
import { closeSync, openSync, readSync, fstatSync } from 'node:fs'
import { describe, expect, it, onTestFinished } from 'vitest'
import { memorySource, type RandomAccess } from '../../jobs/formats/randomAccess'
import { readRecord } from '../../jobs/formats/readRecord'
import { sniffRecord } from '../../jobs/formats/sniffRecord'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()

/** A file on disk by preads; counts the bytes that were read. */
function diskSource(file: string): RandomAccess & { bytesRead: () => number } {
  const descriptor = openSync(file, 'r')
  onTestFinished(() => closeSync(descriptor))
  let total = 0
  const read = (offset: number, length: number) => {
    const bytes = new Uint8Array(length)
    const count = readSync(descriptor, bytes, 0, length, offset)
    total += count
    return bytes.subarray(0, count)
  }
  return { size: fstatSync(descriptor).size, read: async (offset, length) => read(offset, length), readSync: read, bytesRead: () => total }
}

/** scipy's own writer and reader: https://docs.scipy.org/doc/scipy/reference/generated/scipy.io.wavfile.write.html */
describe('WAV files that scipy writes', () => {
  const cases = [
    ['uint8', 'rng.integers(0, 256, (999, 2)).astype(np.uint8)', '(d.astype(float) - 128) / 128'],
    ['int16', 'rng.integers(-2**15, 2**15, (999, 3)).astype(np.int16)', 'd / 2**15'],
    ['int32', 'rng.integers(-2**31, 2**31, (999, 2)).astype(np.int32)', 'd / 2**31'],
    ['float32', 'rng.normal(size=(999, 5)).astype(np.float32)', 'd'],
    ['float64', 'rng.normal(size=(999, 2))', 'd'],
    ['int16, one channel', 'rng.integers(-2**15, 2**15, 999).astype(np.int16)', 'd[:, None] / 2**15'],
    ['int16, 64 channels', 'rng.integers(-2**15, 2**15, (999, 64)).astype(np.int16)', 'd / 2**15'],
  ]
  it.each(cases)('are read alike: %s', async (_, data, value) => {
    const truth = python<number[][]>(`
from scipy.io import wavfile
rng = np.random.default_rng(5)
d = ${data}
wavfile.write('a.wav', 51200, d)
rate, back = wavfile.read('a.wav')
assert rate == 51200 and np.array_equal(back, d)
print(json.dumps(np.asarray(${value}).T.astype(np.float32).astype(float).tolist()))`)
    const source = diskSource(path('a.wav'))
    const last = truth.length - 1
    const record = await readRecord(source, { columns: { illumination: 0, force: last } })
    expect(record).toMatchObject({ format: 'wav', sampleRateHz: 51200, rows: 999, startSeconds: 0, flags: [] })
    expect(record.columns).toHaveLength(truth.length)
    expect(Array.from(record.channels[0].data)).toEqual(truth[0])
    expect(Array.from(record.channels[1].data)).toEqual(truth[last])
  })
})

describe('WAV files that ffmpeg writes', () => {
  /** The same samples by ffmpeg's own decoder, as interleaved float32. */
  const decoded = (file: string) => {
    const bytes = execFileSync('ffmpeg', ['-v', 'error', '-i', file, '-f', 'f32le', '-'], { maxBuffer: 1 << 28 })
    return new Float32Array(bytes.buffer.slice(bytes.byteOffset, bytes.byteOffset + bytes.byteLength))
  }
  const write = (file: string, options: string[]) => execFileSync('ffmpeg', ['-v', 'error', '-y', '-f', 'lavfi', '-i', 'anoisesrc=r=48000:d=0.5:seed=3:a=0.4', '-f', 'lavfi', '-i', 'sine=440:r=48000:d=0.5', '-filter_complex', 'amerge=inputs=2', ...options, path(file)])

  it.each([
    ['16-bit', ['-c:a', 'pcm_s16le']],
    ['24-bit', ['-c:a', 'pcm_s24le']],
    ['32-bit', ['-c:a', 'pcm_s32le']],
    ['32-bit float', ['-c:a', 'pcm_f32le']],
    ['64-bit float', ['-c:a', 'pcm_f64le']],
    ['RF64', ['-c:a', 'pcm_s24le', '-rf64', 'always']],
  ])('are read as ffmpeg decodes them: %s', async (_, options) => {
    write('b.wav', options)
    const truth = decoded(path('b.wav'))
    const record = await readRecord(diskSource(path('b.wav')), { columns: { illumination: 0, force: 1 } })
    expect(record).toMatchObject({ sampleRateHz: 48000, rows: truth.length / 2, flags: [] })
    for (const channel of [0, 1]) {
      const own = Float32Array.from(truth.filter((_value, i) => i % 2 === channel))
      const worst = record.channels[channel].data.reduce((most, value, i) => Math.max(most, Math.abs(value - own[i])), 0)
      expect(worst).toBeLessThanOrEqual(2 ** -24)
    }
  })

  it('to a pipe, with lengths never filled in, are read to their end and flagged', async () => {
    const bytes = execFileSync('ffmpeg', ['-v', 'error', '-f', 'lavfi', '-i', 'sine=440:r=48000:d=0.5', '-f', 'wav', '-'])
    const record = await readRecord(memorySource(Uint8Array.from(bytes)), {})
    expect(record.rows).toBe(24000)
    expect(record.flags.map(({ code }) => code)).toContain('wav-length')
  })
})

/** https://numpy.org/doc/stable/reference/generated/numpy.lib.format.html */
describe('NPY files that numpy writes', () => {
  it.each(['<i2', '>i2', '<i4', '>i4', '<i8', '|i1', '|u1', '<u2', '>u4', '<f2', '>f2', '<f4', '>f4', '<f8', '>f8'].flatMap(type => [[type, 'C'], [type, 'F']]))('are read alike: %s in %s order', async (type, order) => {
    const truth = python<number[][]>(`
rng = np.random.default_rng(5)
d = np.asarray((rng.normal(size=(500, 3)) * 50 + (60 if '${type}'[1] == 'u' else 0)).clip(0 if '${type}'[1] == 'u' else -120, 120).astype('${type}'), order='${order}')
np.save('a.npy', d)
np.save('b.npy', np.asarray(d.T, order='${order}'))
np.save('c.npy', d[:, 1])
print(json.dumps(d.T.astype(np.float32).astype(float).tolist()))`)
    for (const file of ['a.npy', 'b.npy']) {
      const record = await readRecord(diskSource(path(file)), { columns: { illumination: 2, force: 0 }, sampleRateHz: 1000 })
      expect(record).toMatchObject({ format: 'npy', rows: 500, sampleRateHz: 1000 })
      expect(record.columns).toHaveLength(3)
      expect(record.channels.map(({ data }) => Array.from(data))).toEqual([truth[2], truth[0]])
    }
    const single = await readRecord(diskSource(path('c.npy')), { sampleRateHz: 1000 })
    expect(Array.from(single.channels[0].data)).toEqual(truth[1])
  })

  it('with named fields give channels, time and units', async () => {
    const truth = python<number[]>(`
d = np.zeros(4000, dtype=[('time', '<f8'), ('Lamp [V]', '>i2'), ('note', 'S5'), ('xyz', '<f4', (3,)), ('force', '<f4')])
d['time'] = 3 + np.arange(4000) / 2048
d['Lamp [V]'] = np.arange(4000) % 977
d['force'] = np.sin(np.arange(4000))
np.save('s.npy', d)
print(json.dumps(d['force'].astype(float).tolist()))`)
    const record = await readRecord(diskSource(path('s.npy')))
    expect(record).toMatchObject({ sampleRateHz: 2048, startSeconds: 3, rows: 4000 })
    expect(record.columns.map(({ header }) => header)).toEqual(['time', 'Lamp [V]', 'xyz[0]', 'xyz[1]', 'xyz[2]', 'force'])
    expect(record.channels.map(({ role, unit }) => [role, unit])).toEqual([['illumination', 'V'], ['force', null]])
    expect(record.channels[0].data[978]).toBe(1)
    expect(Array.from(record.channels[1].data)).toEqual(truth)
  })

  it.each([[1, 0], [2, 0], [3, 0]])('of version %i are read', async (major, minor) => {
    python(`
with open('v.npy', 'wb') as f: np.lib.format.write_array(f, np.arange(50, dtype='f4'), version=(${major}, ${minor}))
print(1)`)
    expect((await readRecord(diskSource(path('v.npy')), { sampleRateHz: 5 })).channels[0].data[49]).toBe(49)
  })

  it('of many channels in Fortran order are read without the channels that are not wanted', async () => {
    python(`
np.save('wide.npy', np.asfortranarray(np.zeros((100_000, 16), 'f4')))
print(1)`)
    const source = diskSource(path('wide.npy'))
    await readRecord(source, { columns: { illumination: 3 }, sampleRateHz: 5 })
    expect(source.bytesRead()).toBeLessThan(450_000)
  })

  it('are sniffed without reading them whole', async () => {
    python(`
t = np.arange(1_000_000) / 1000
np.save('big.npy', np.stack([t, np.sin(t)], axis=1))
print(1)`)
    const source = diskSource(path('big.npy'))
    const sniff = await sniffRecord(source)
    expect(sniff).toMatchObject({ rows: 1_000_000, rowsAreExact: true, sampleRateHz: 1000, needs: null })
    expect(sniff.columns.map(({ guess }) => guess)).toEqual([{ role: 'time', reason: 'it rises evenly' }, { role: 'illumination', reason: 'it is the only channel left' }])
    expect(source.bytesRead()).toBeLessThan(20_000)
  })
})
