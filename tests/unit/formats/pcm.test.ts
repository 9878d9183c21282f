import { describe, expect, it } from 'vitest'
import { pcmRecord, type PcmOptions } from '../../../jobs/formats/pcmRecord'

async function* pieces(values: readonly number[], size: number) {
  const bytes = new Uint8Array(Float32Array.from(values).buffer)
  for (let at = 0; at < bytes.length; at += size) yield bytes.subarray(at, at + size)
}
const stereo = Array.from({ length: 2000 }, (_, i) => i % 2 ? 0.5 * Math.sin(i / 9) : 0.001 * Math.sin(i / 5))
const read = (options: Partial<PcmOptions> = {}, values = stereo, size = 4096) => pcmRecord(pieces(values, size), { channels: 2, sampleRateHz: 48_000, ...options })
const codes = ({ flags }: { flags: { code: string }[] }) => flags.map(({ code }) => code)
const single = (channel: number) => Array.from(Float32Array.from(stereo.filter((_, i) => i % 2 === channel)))

describe('the clip’s sound as a record', () => {
  it.each([1, 7, 8, 1001, 1 << 20])('is the same in pieces of %i bytes', async (size) => {
    const record = await read({ channel: 0, startSeconds: -0.02 }, stereo, size)
    expect(record).toMatchObject({ format: 'audio', rows: 1000, sampleRateHz: 48_000, startSeconds: -0.02 })
    expect(Array.from(record.channels[0].data)).toEqual(single(0))
  })

  it('takes the loudest channel when none is named, and always says that the level is lost', async () => {
    const record = await read()
    expect(record.channels).toMatchObject([{ role: 'illumination', name: 'channel 2', unit: null }])
    expect(Array.from(record.channels[0].data)).toEqual(single(1))
    expect(codes(record)).toEqual(['ac-coupled', 'columns-guessed'])
    expect(codes(await read({ channel: 1 }))).toEqual(['ac-coupled'])
  })

  it('tells clipping and silence', async () => {
    expect(codes(await read({ channel: 1 }, stereo.map(value => Math.max(-1, Math.min(1, 3 * value)))))).toContain('audio-clipped')
    expect(codes(await read({ channel: 1 }, stereo.map(() => 0)))).toContain('audio-silent')
  })

  it('is refused without samples, for a channel that is not there, and with what is no number', async () => {
    await expect(read({}, [])).rejects.toThrow(/has 0 samples/)
    await expect(read({ channel: 2 })).rejects.toThrow(/no channel number 2/)
    await expect(read({ channel: 1 }, [0, 0, 0, Number.NaN])).rejects.toThrow(/Sample 1 of the clip’s sound is no number/)
  })
})
