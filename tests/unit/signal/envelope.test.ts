import { describe, expect, it } from 'vitest'
import { memorySource, type RandomAccess } from '../../../jobs/formats/randomAccess'
import { buildPyramid, envelope, pyramidLayout, readEnvelope, type Envelope } from '../../../jobs/signal/envelope'

/** A seeded generator, so that a failure repeats (Lehmer, Park and Miller 1988). */
function generator(seed: number) {
  let state = seed
  return () => (state = state * 48271 % 2147483647) / 2147483647
}
const noise = (count: number, seed = 7) => Float32Array.from({ length: count }, generator(seed))
const bytesOf = (values: Float32Array) => new Uint8Array(values.buffer, values.byteOffset, values.byteLength)

function bruteForce(data: Float32Array, edges: Float64Array) {
  const columns = Array.from({ length: edges.length - 1 }, (_, i) => data.slice(edges[i], edges[i + 1]).filter(value => !Number.isNaN(value)))
  return {
    minimum: columns.map(values => values.length ? values.reduce((a, b) => Math.min(a, b)) : Number.NaN),
    maximum: columns.map(values => values.length ? values.reduce((a, b) => Math.max(a, b)) : Number.NaN),
  }
}
const plain = ({ minimum, maximum }: Envelope) => ({ minimum: Array.from(minimum), maximum: Array.from(maximum) })

/** Counts what is read. */
function counted(bytes: Uint8Array): RandomAccess & { total: () => number } {
  const { size, read } = memorySource(bytes)
  let total = 0
  return {
    size, total: () => total,
    read: (offset, length) => {
      total += length
      return read(offset, length)
    },
  }
}
const stored = (data: Float32Array) => ({ samples: data.length, data: counted(bytesOf(data)), pyramid: counted(bytesOf(buildPyramid(data).pairs)) })

describe('envelope of a channel', () => {
  it('equals brute force at any zoom, from memory and from files', async () => {
    const random = generator(3)
    for (const length of [1, 2, 15, 16, 17, 63, 64, 65, 1000, 65_536, 100_003]) {
      const data = noise(length, length + 1)
      const pyramid = buildPyramid(data)
      const files = stored(data)
      for (let i = 0; i < 60; i++) {
        const from = Math.floor(random() ** 2 * length)
        const to = i % 3 ? from + 1 + Math.floor(random() * (length - from)) : length
        const columns = 1 + Math.floor(random() ** 3 * 700)
        const found = envelope(pyramid, data, i % 5 ? from : 0, to, columns)
        expect(plain(found)).toEqual(bruteForce(data, found.edges))
        expect(await readEnvelope(files, i % 5 ? from : 0, to, columns)).toEqual(found)
      }
    }
  })

  it('reaches from the very first to the very last sample that was asked', () => {
    const data = Float32Array.from({ length: 5000 }, (_, i) => i)
    const pyramid = buildPyramid(data)
    for (let from = 0; from < 300; from += 7) {
      for (let to = 4700; to <= 5000; to++) {
        const { minimum, maximum } = envelope(pyramid, data, from, to, 3)
        expect([minimum[0], maximum[2]]).toEqual([from, to - 1])
      }
    }
  })

  it('covers just what was asked, in columns whose edges are moved by an eighth of a column at most', () => {
    const data = noise(300_000)
    const pyramid = buildPyramid(data)
    for (const [from, to, columns] of [[0, 300_000, 1000], [12_345, 287_654, 700], [7, 5007, 900], [1, 299_999, 3], [40, 61, 9], [100, 64_100, 999]]) {
      const { edges } = envelope(pyramid, data, from, to, columns)
      expect([edges[0], edges.at(-1), edges.length]).toEqual([from, to, columns + 1])
      const width = (to - from) / columns
      edges.forEach((edge, i) => expect(Math.abs(edge - from - i * width)).toBeLessThanOrEqual(Math.max(1, width / 8)))
    }
  })

  it('never loses a single-sample peak', () => {
    const data = new Float32Array(250_000)
    for (let at = 0; at < data.length; at += 7919) {
      data[at] = 1
      const { maximum } = envelope(buildPyramid(data), data, 0, data.length, 20)
      expect(maximum.reduce((sum, value) => sum + value, 0)).toBe(1)
      data[at] = 0
      if (at > 100_000) break
    }
  })

  it('passes over values that are no numbers', async () => {
    const data = noise(50_000)
    data.fill(Number.NaN, 10_000, 30_000)
    data[45_678] = Number.NaN
    const found = await readEnvelope(stored(data), 3, 49_990, 17)
    expect(plain(found)).toEqual(bruteForce(data, found.edges))
    expect(found.minimum.some(Number.isNaN)).toBe(true)
  })

  it('is clipped to the channel, and has no more columns than samples', () => {
    const data = Float32Array.of(3, 1, 2)
    expect(envelope(buildPyramid(data), data, -5, 99, 10)).toMatchObject({ edges: Float64Array.of(0, 1, 2, 3), minimum: data, maximum: data })
    expect(envelope(buildPyramid(data), data, 3, 9, 10).minimum).toHaveLength(0)
    expect(envelope(buildPyramid(new Float32Array(0)), new Float32Array(0), 0, 1, 10).minimum).toHaveLength(0)
  })

  it('reads no more than 256 bytes a column and two kilobytes at the ends', async () => {
    const data = noise(3_000_000)
    for (const [from, to] of [[0, 3_000_000], [1, 2_999_999], [123_457, 1_234_567], [1_000_001, 1_020_001], [5, 63_000]]) {
      const files = stored(data)
      await readEnvelope(files, from, to, 1000)
      expect(files.data.total() + files.pyramid.total()).toBeLessThanOrEqual(256 * 1000 + 2048)
    }
  })

  it('says so when a file is too short', async () => {
    const files = stored(noise(5000))
    await expect(readEnvelope({ ...files, data: memorySource(new Uint8Array(400)) }, 0, 200, 200)).rejects.toThrow(/channel ends at byte 400/)
  })
})

describe('pyramid', () => {
  it('takes a sixth of the channel, and ends in a single pair', () => {
    const { levels, pairs } = pyramidLayout(30_000_000)
    expect(levels.at(-1)!.bins).toBe(1)
    expect(8 * pairs / (4 * 30_000_000)).toBeLessThan(1 / 6 + 0.001)
    expect(buildPyramid(noise(1000)).pairs.length).toBe(2 * pyramidLayout(1000).pairs)
  })
})
