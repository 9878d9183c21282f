import { accessSync, constants } from 'node:fs'
import { stat } from 'node:fs/promises'
import { delimiter, join } from 'node:path'
import type { ReadableClip } from './lumaStream'
import { maximumPixels } from './pixelFormats'

/** What a child process may use; a damaged or hostile file can ask for any amount. */
export interface ProcessLimits {
  /** Private memory, written to or not (RLIMIT_DATA of setrlimit(2)). */
  memoryBytes: number
  /** Processor time of all threads together. */
  cpuSeconds?: number
}

const mebibyte = 1 << 20

/** Measured with ffmpeg 5.1: 3840×2160 of 10 bits 4:2:2 H.265 takes 770 MiB with 4 threads and 1370 MiB with 16, this allows twice that. */
export function decodeLimits({ width, height, bitDepth, frameCount }: ReadableClip, threads: number): ProcessLimits {
  const pictureBytes = width * height * (bitDepth > 8 ? 6 : 3)
  const memoryBytes = 512 * mebibyte + pictureBytes * (32 + 2 * threads)
  // A second a megapixel is some fifty times what H.265 takes.
  return frameCount === undefined ? { memoryBytes } : { memoryBytes, cpuSeconds: Math.ceil(120 + frameCount * Math.max(0.2, width * height / 1e6)) }
}

/** For a file of which nothing is known yet but its size. */
export const probeLimits = (fileBytes: number): ProcessLimits => ({ memoryBytes: 512 * mebibyte + 48 * 3 * maximumPixels / 2, cpuSeconds: Math.ceil(60 + fileBytes / 1e6) })

/** Limits for going once through all packets of a file; ten million bytes a second is a slow disk. */
export async function passLimits(path: string): Promise<{ limits: ProcessLimits, timeoutSeconds: number }> {
  const { size } = await stat(path)
  return { limits: probeLimits(size), timeoutSeconds: Math.ceil(120 + size / 1e7) }
}

let limiter: string | null | undefined

/** The command that runs a program under limits: util-linux's prlimit where there is one, else the program itself. */
export function limitedCommand(program: string, args: string[], limits: ProcessLimits | undefined): [string, string[]] {
  if (limiter === undefined) limiter = findInPath('prlimit')
  if (!limits || limiter === null) return [program, args]
  const { memoryBytes, cpuSeconds } = limits
  return [limiter, [`--data=${Math.ceil(memoryBytes)}`, '--core=0', ...cpuSeconds === undefined ? [] : [`--cpu=${cpuSeconds}:${cpuSeconds}`], program, ...args]]
}

function findInPath(name: string): string | null {
  for (const folder of (process.env.PATH ?? '').split(delimiter)) {
    try {
      accessSync(join(folder, name), constants.X_OK)
      return join(folder, name)
    } catch {
      continue
    }
  }
  return null
}
