interface WavOptions {
  /** One array a channel, in [−1, 1). */
  samples: number[][]
  sampleRateHz?: number
  bits?: 16 | 24 | 32
  container?: 'RIFF' | 'RF64' | 'BW64' | 'RIFX'
  /** As a subformat of WAVE_FORMAT_EXTENSIBLE. */
  extensible?: boolean
  formatTag?: number
  /** What the header claims; the true length when left out. */
  dataLength?: number
  /** Chunks between format and samples, and after the samples. */
  before?: [string, number][]
  after?: [string, number][]
}

/** A WAV by the RIFF and EBU Tech 3306 layouts, with whatever fault a test needs. */
export function wavFile({ samples, sampleRateHz = 48_000, bits = 16, container = 'RIFF', extensible = false, formatTag = 1, dataLength, before = [], after = [] }: WavOptions): Uint8Array {
  const big = container === 'RIFX'
  const out: number[] = []
  const put = (value: number, count: number) => {
    const little = Array.from({ length: count }, (_, i) => Math.floor(value / 2 ** (8 * i)) & 0xff)
    out.push(...big ? little.reverse() : little)
  }
  const name = (text: string) => out.push(...Array.from(text, character => character.charCodeAt(0)))
  const filler = ([id, length]: [string, number]) => {
    name(id)
    put(length, 4)
    out.push(...new Array<number>(length + length % 2).fill(7))
  }
  const channels = samples.length
  const frameBytes = channels * bits / 8
  const bytes = samples[0].length * frameBytes
  const is64 = container === 'RF64' || container === 'BW64'
  name(container)
  put(is64 ? 0xffffffff : 36 + bytes, 4)
  name('WAVE')
  if (is64) {
    name('ds64')
    put(28, 4)
    put(36 + bytes, 8)
    put(dataLength ?? bytes, 8)
    put(samples[0].length, 8)
    put(0, 4)
  }
  name('fmt ')
  put(extensible ? 40 : 16, 4)
  put(extensible ? 0xfffe : formatTag, 2)
  put(channels, 2)
  put(sampleRateHz, 4)
  put(sampleRateHz * frameBytes, 4)
  put(frameBytes, 2)
  put(bits, 2)
  if (extensible) {
    put(22, 2)
    put(bits, 2)
    put(0, 4)
    put(formatTag, 2)
    out.push(0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xaa, 0, 0x38, 0x9b, 0x71)
  }
  before.forEach(filler)
  name('data')
  put(is64 ? 0xffffffff : dataLength ?? bytes, 4)
  for (let i = 0; i < samples[0].length; i++) for (const channel of samples) put(Math.round(channel[i] * 2 ** (bits - 1)), bits / 8)
  after.forEach(filler)
  return Uint8Array.from(out)
}
