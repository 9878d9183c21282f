/** Work on pixels that a thread can do by itself: it opens files, computes, writes, and answers a few numbers. */
import { closeSync, openSync, readSync, writeSync } from 'node:fs'
import { estimateShift, type Shift } from '../imaging/shift'
import { planSolution, solveBand, type SolvePlan } from '../imaging/solve'

/** Where one group's sums lie, [H, W] uint32: in a file of their own or inside a frame set. */
export interface SumSource {
  path: string
  offset: number
}

export interface SolvedOffsets {
  scene: number
  p: number
  q: number
  noise: number
}

export interface ShiftTask {
  kind: 'shift'
  a: SumSource
  b: SumSource
  width: number
  height: number
}

export interface BandTask {
  kind: 'band'
  plan: SolvePlan
  /** Of the plan's used groups. */
  sources: SumSource[]
  firstPixel: number
  pixels: number
  target: { path: string, offsets: SolvedOffsets }
}

export interface WarmUpTask {
  kind: 'warm up'
}

export type SolveTask = ShiftTask | BandTask | WarmUpTask
export interface TaskResults {
  'warm up': null
  'shift': Shift
  'band': null
}

export function runSolveTask<T extends SolveTask>(task: T): TaskResults[T['kind']] {
  const result: Shift | null = task.kind === 'shift' ? shiftOf(task) : task.kind === 'band' ? bandOf(task) : warmUp()
  return result as TaskResults[T['kind']]
}

/** Memory that was used before costs nothing; fresh memory costs more than reading into it. */
const kept = new Map<string, Uint32Array>()

function memory(use: string, values: number): Uint32Array {
  let array = kept.get(use)
  if (!array || array.length < values) kept.set(use, array = new Uint32Array(values))
  return array.length === values ? array : array.subarray(0, values)
}

/** @throws Error when the file ends before */
export function readSums({ path, offset }: SumSource, firstPixel: number, values: Uint32Array): Uint32Array {
  const file = openSync(path, 'r')
  try {
    readInto(file, offset + firstPixel * 4, values)
  } finally {
    closeSync(file)
  }
  return values
}

function readInto(file: number, position: number, values: Uint32Array): void {
  const bytes = new Uint8Array(values.buffer, values.byteOffset, values.byteLength)
  for (let done = 0; done < bytes.length;) {
    const read = readSync(file, bytes, done, bytes.length - done, position + done)
    if (!read) throw new Error('A file ends in the middle of a group’s sums')
    done += read
  }
}

function shiftOf({ a, b, width, height }: ShiftTask): Shift {
  return estimateShift(readSums(a, 0, memory('first', width * height)), readSums(b, 0, memory('second', width * height)), width, height)
}

/** Sums of all groups that a thread holds at a time: few enough for a processor's cache, the same for any number of groups. */
const bandBytes = 2 << 20
const leastBandPixels = 1024

function bandOf({ plan, sources, firstPixel, pixels, target: { path, offsets } }: BandTask): null {
  const band = Math.max(leastBandPixels, Math.floor(bandBytes / 4 / (sources.length + 4)))
  const files = new Map([path, ...sources.map(source => source.path)].map(each => [each, -1]))
  try {
    for (const each of files.keys()) files.set(each, openSync(each, each === path ? 'r+' : 'r'))
    for (let from = firstPixel; from < firstPixel + pixels; from += band) {
      const length = Math.min(band, firstPixel + pixels - from)
      const sums = sources.map((source, g) => {
        const values = memory(`sums ${g}`, length)
        readInto(files.get(source.path)!, source.offset + from * 4, values)
        return values
      })
      const image = (name: string) => new Float32Array(memory(name, length).buffer, 0, length)
      const images = { scene: image('scene'), p: image('p'), q: image('q'), noise: image('noise') }
      solveBand(plan, sums, images)
      for (const name of ['scene', 'p', 'q', 'noise'] as const) writeAll(files.get(path)!, images[name], offsets[name] + from * 4)
    }
  } finally {
    for (const file of files.values()) if (file >= 0) closeSync(file)
  }
  return null
}

/** A few small bands of nothing in particular, until the compiler has done its part. */
function warmUp(): null {
  const sums = Array.from({ length: 4 }, (_, g) => Uint32Array.from({ length: 8192 }, (_, i) => 3_000_000_000 + 977 * ((i * (g + 3)) % 1013)))
  const plan = planSolution({ roles: ['reference', 'phase', 'phase', 'phase'], integrals: Float64Array.of(100, 0, 0, 100, 40, 0, 100, 0, 40, 100, 40, 1), frames: [50, 50, 50, 50] })
  const image = () => new Float32Array(8192)
  const images = { scene: image(), p: image(), q: image(), noise: image() }
  for (let turn = 0; turn < 40; turn++) solveBand(plan, sums, images)
  return null
}

function writeAll(file: number, { buffer, byteOffset, byteLength }: Float32Array, position: number): void {
  const bytes = new Uint8Array(buffer, byteOffset, byteLength)
  for (let done = 0; done < byteLength;) done += writeSync(file, bytes, done, byteLength - done, position + done)
}
