import type { FrameMeter } from '../imaging/accumulate'
import type { LightTable } from '../media/transfer'
import { lightWasm } from './light.wasm'

interface Exports {
  addEightBytes: (sum: number, frames: number, stride: number, pixels: number, low: number, high: number, totals: number) => void
  addEightWords: Exports['addEightBytes']
  addOneByte: (sum: number, frame: number, pixels: number, low: number, totals: number) => void
  addOneWord: Exports['addOneByte']
  countExtremeBytes: (frame: number, pixels: number, clippedFrom: number, blackUpTo: number, counts: number) => void
  countExtremeWords: Exports['countExtremeBytes']
}

/** Frames that one pass takes: each pixel of the sum is then loaded and stored once for eight frames. */
export const batchFrames = 8

const pageBytes = 65_536
const align = (bytes: number) => Math.ceil(bytes / 64) * 64
let compiled: WebAssembly.Module | undefined

/** An image being added up in the kernel's memory. */
export interface OpenSum {
  readonly address: number
}

/**
 * Adds frames in linear light, exactly, and measures each on the way: what `addFrame` and `meterFrame` of
 * jobs/imaging/accumulate.ts do, several times faster, by WebAssembly.
 *
 * Frames are put into the slots of a batch (`slot(k)`), then `add` takes the first `count` of them. Sums are modulo
 * 2³², exact up to `maximumFramesPerSum` frames; additions commute, so the order of batches does not matter. Memory
 * grows with the number of open sums: views are good until the next `open`.
 */
export class LightKernel {
  private readonly memory: WebAssembly.Memory
  private readonly run: Exports
  private readonly frameBytes: number
  private readonly at: { low: number, high: number, negated: number, totals: number, frames: number, scratch: number }
  private end: number
  private readonly free: OpenSum[] = []

  /**
   * @param pixels pixels of a frame
   * @param table light of each code; 256 entries take frames of one byte a pixel, 1024 of two
   * @throws RangeError for a table of another length or with entries above 65 535
   */
  constructor(readonly pixels: number, private readonly table: LightTable) {
    const codes = table.counts.length
    if (codes !== 256 && codes !== 1024) throw new RangeError(`The kernel takes 8 or 10 bits, not a table of ${codes} codes.`)
    if (table.counts.some(counts => counts > 65_535)) throw new RangeError('The light of a code must fit 16 bits.')
    this.frameBytes = pixels * (codes === 256 ? 1 : 2)
    const tableBytes = codes * 8
    const totals = pageBytes
    const low = totals + 256
    const frames = align(low + 3 * tableBytes)
    const scratch = align(frames + batchFrames * align(this.frameBytes))
    this.at = { totals, low, high: low + tableBytes, negated: low + 2 * tableBytes, frames, scratch }
    this.end = align(scratch + 4 * pixels)
    this.memory = new WebAssembly.Memory({ initial: Math.ceil(this.end / pageBytes) })
    compiled ??= new WebAssembly.Module(Uint8Array.from(atob(lightWasm), character => character.charCodeAt(0)))
    this.run = new WebAssembly.Instance(compiled, { env: { memory: this.memory } }).exports as unknown as Exports
    this.writeTables()
  }

  private writeTables(): void {
    const { low, high, negated } = this.at
    const { counts } = this.table
    const view = (address: number) => new Uint32Array(this.memory.buffer, address, 2 * counts.length)
    const [lows, highs, negatives] = [view(low), view(high), view(negated)]
    counts.forEach((light, code) => {
      lows[2 * code] = light
      highs[2 * code + 1] = light
      negatives[2 * code] = -light
    })
  }

  /** Bytes of frame `slot` (0 to 7) of the batch; raw luma codes, little-endian when two bytes a pixel. */
  slot(slot: number): Uint8Array<ArrayBuffer> {
    return new Uint8Array(this.memory.buffer, this.at.frames + slot * align(this.frameBytes), this.frameBytes)
  }

  /** A new sum, all 0 or a copy of `from`. */
  open(from?: Uint32Array): OpenSum {
    const sum = this.free.pop() ?? this.allocate()
    if (from) this.image(sum).set(from)
    else this.image(sum).fill(0)
    return sum
  }

  private allocate(): OpenSum {
    const address = this.end
    this.end = align(address + 4 * this.pixels)
    const missing = Math.ceil((this.end - this.memory.buffer.byteLength) / pageBytes)
    if (missing > 0) this.memory.grow(missing)
    return { address }
  }

  /** The sum as it stands; a view, copy what must outlive `close` or the next `open`. */
  image(sum: OpenSum): Uint32Array<ArrayBuffer> {
    return new Uint32Array(this.memory.buffer, sum.address, this.pixels)
  }

  close(sum: OpenSum): void {
    this.free.push(sum)
  }

  /**
   * Adds the first `count` frames of the batch to every sum given, and measures them.
   *
   * @param sums none: the frames are only measured
   */
  add(count: number, sums: readonly OpenSum[]): FrameMeter[] {
    const targets = sums.length ? sums.map(sum => sum.address) : [this.at.scratch]
    const { low, high, frames, totals } = this.at
    const stride = align(this.frameBytes)
    const narrow = this.table.counts.length === 256
    const lights: number[] = []
    for (const target of targets) {
      lights.length = 0
      if (count === batchFrames) {
        (narrow ? this.run.addEightBytes : this.run.addEightWords)(target, frames, stride, this.pixels, low, high, totals)
        for (let k = 0; k < count; k++) lights.push(this.total(k))
      } else {
        for (let k = 0; k < count; k++) {
          (narrow ? this.run.addOneByte : this.run.addOneWord)(target, frames + k * stride, this.pixels, low, totals)
          lights.push(this.total(0))
        }
      }
    }
    return lights.map((counts, k) => ({ counts, pixels: this.pixels, ...this.extremes(frames + k * stride) }))
  }

  /** Takes the first `count` frames of the batch out of a sum that holds them. */
  subtract(count: number, sum: OpenSum): void {
    const add = this.table.counts.length === 256 ? this.run.addOneByte : this.run.addOneWord
    for (let k = 0; k < count; k++) add(sum.address, this.at.frames + k * align(this.frameBytes), this.pixels, this.at.negated, this.at.totals)
  }

  private total(index: number): number {
    return Number(new BigUint64Array(this.memory.buffer, this.at.totals + 8 * index, 1)[0])
  }

  private extremes(frame: number): { clipped: number, black: number } {
    const count = this.table.counts.length === 256 ? this.run.countExtremeBytes : this.run.countExtremeWords
    const address = this.at.totals + 128
    count(frame, this.pixels, this.table.clippedFrom, this.table.blackUpTo, address)
    const [clipped, black] = new Uint32Array(this.memory.buffer, address, 2)
    return { clipped: clipped!, black: black! }
  }
}
