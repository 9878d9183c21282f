import { readFileSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { addFrame, maximumFramesPerSum, meterFrame, type Luma } from '../../../jobs/imaging/accumulate'
import { lightWasm } from '../../../jobs/kernels/light.wasm'
import { batchFrames, LightKernel } from '../../../jobs/kernels/lightKernel'
import { createLightTable } from '../../../jobs/media/transfer'
import { compileKernel, kernelFile } from '../../../scripts/lib/kernels'
import { random } from '../imaging/pictures'

const bytesOf = (luma: Luma) => new Uint8Array(luma.buffer, luma.byteOffset, luma.byteLength)

function frames(count: number, pixels: number, bits: number, seed: number): Luma[] {
  const next = random(seed)
  return Array.from({ length: count }, () => (bits === 8 ? new Uint8Array(pixels) : new Uint16Array(pixels)).map(() => Math.floor(next() * 2 ** bits)))
}

/** Through the kernel, in batches of 8 and a shorter last one. */
function addAll(kernel: LightKernel, luma: Luma[], sums: Parameters<LightKernel['add']>[1]) {
  const meters = []
  for (let first = 0; first < luma.length; first += batchFrames) {
    const batch = luma.slice(first, first + batchFrames)
    batch.forEach((frame, k) => kernel.slot(k).set(bytesOf(frame)))
    meters.push(...kernel.add(batch.length, sums))
  }
  return meters
}

describe('the light kernel', () => {
  // 1 and 37: shorter than a vector; 40 003: more than a block, and not a whole number of vectors.
  it.each([[8, 1], [8, 37], [8, 40_003], [10, 1], [10, 37], [10, 40_003]])('adds and measures %i-bit frames of %i pixels as the plain loops do', (bits, pixels) => {
    const table = createLightTable('bt709', 'limited', bits)
    const kernel = new LightKernel(pixels, table)
    const luma = frames(27, pixels, bits, pixels + bits)
    const expected = new Uint32Array(pixels)
    for (const frame of luma) addFrame(expected, frame, table)
    const sum = kernel.open()
    expect(addAll(kernel, luma, [sum])).toEqual(luma.map(frame => meterFrame(frame, table)))
    expect(Buffer.compare(Buffer.from(kernel.image(sum)), Buffer.from(expected))).toBe(0)
    expect([...kernel.image(sum)]).toEqual([...expected])
  })

  it('measures alike when nothing is summed, and leaves open sums alone', () => {
    const table = createLightTable('srgb', 'full', 8)
    const kernel = new LightKernel(500, table)
    const luma = frames(13, 500, 8, 3)
    const sum = kernel.open(new Uint32Array(500).fill(7))
    expect(addAll(kernel, luma, [])).toEqual(luma.map(frame => meterFrame(frame, table)))
    expect([...kernel.image(sum)]).toEqual(Array<number>(500).fill(7))
  })

  it('takes frames out of a sum again, to the bit', () => {
    for (const bits of [8, 10]) {
      const table = createLightTable('bt709', 'limited', bits)
      const kernel = new LightKernel(333, table)
      const luma = frames(20, 333, bits, bits)
      const part = new Uint32Array(333)
      for (const frame of luma.slice(0, 13)) addFrame(part, frame, table)
      const sum = kernel.open()
      addAll(kernel, luma, [sum])
      luma.slice(13).forEach((frame, k) => kernel.slot(k).set(bytesOf(frame)))
      kernel.subtract(7, sum)
      expect([...kernel.image(sum)]).toEqual([...part])
    }
  })

  it('holds 65 536 frames of the brightest code without overflow', () => {
    const table = createLightTable('bt709', 'limited', 10)
    const kernel = new LightKernel(3, table)
    const sum = kernel.open()
    for (let k = 0; k < batchFrames; k++) kernel.slot(k).set(bytesOf(Uint16Array.of(1023, 1023, 0)))
    for (let frame = 0; frame < maximumFramesPerSum; frame += batchFrames) kernel.add(batchFrames, [sum])
    expect([...kernel.image(sum)]).toEqual([table.counts[1023] * maximumFramesPerSum, table.counts[1023] * maximumFramesPerSum, 0])
  })

  it('keeps several sums apart while memory grows, and gives a closed one out again empty', () => {
    const table = createLightTable('bt709', 'limited', 8)
    const kernel = new LightKernel(70_000, table)
    const luma = frames(8, 70_000, 8, 5)
    const expected = new Uint32Array(70_000)
    for (const frame of luma) addFrame(expected, frame, table)
    const all = Array.from({ length: 9 }, () => kernel.open())
    addAll(kernel, luma, [all[2]!, all[8]!])
    for (const [index, sum] of all.entries()) expect(kernel.image(sum)[69_999], `sum ${index}`).toBe(index === 2 || index === 8 ? expected[69_999] : 0)
    kernel.close(all[2]!)
    expect(kernel.image(kernel.open()).every(value => value === 0)).toBe(true)
  })

  it('refuses tables that it cannot add', () => {
    const table = createLightTable('bt709', 'limited', 8)
    expect(() => new LightKernel(4, { ...table, counts: new Uint32Array(512) })).toThrow(/8 or 10 bits/)
    expect(() => new LightKernel(4, { ...table, counts: new Uint32Array(256).fill(70_000) })).toThrow(/16 bits/)
  })

  it('is compiled from the source beside it', async () => {
    expect(Buffer.from(await compileKernel('light')).toString('base64')).toBe(lightWasm)
    expect(readFileSync(kernelFile('light'), 'utf8')).toContain('Do not edit')
  }, 60_000)
})
