import { copyFile, link, open, readFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { ClipFacts, Group, LampPatch } from '../../shared/measurement'
import { assertSummable, meterFrame, type FrameMeter } from '../imaging/accumulate'
import { framesNeeded, planSums, type FrameSpan, type SumTask } from '../imaging/sumPlan'
import { LightKernel } from '../kernels/lightKernel'
import type { FrameIndex } from '../media/frameIndex'
import { countsPerWhite, createLightTable } from '../media/transfer'
import { decodeClip, decodeRanges, type FrameSink } from './decode'
import { FrameSummer } from './frameSummer'
import { setLight, type FrameLight } from './lightFile'
import type { StageHelpers } from './stage'
import { digestOf, type SumDigest } from './sumDigest'

export interface ClipSource {
  path: string
  clip: ClipFacts
  index: FrameIndex
  /** Part of the picture that sees the lamp itself. */
  lampPatch: LampPatch | null
}

/** A sum that exists as a file: raw little-endian uint32, height × width. */
export interface SumFile extends FrameSpan {
  path: string
  digest: SumDigest
}

type Task = SumTask<Group, SumFile>

export function kernelFor({ transfer, range, bitDepth, width, height }: ClipFacts): LightKernel {
  return new LightKernel(width * height, createLightTable(transfer, range, bitDepth))
}

/** Puts what was measured of a frame into its place; the lamp patch is small enough for a plain loop. */
function lightTaker({ clip, lampPatch }: ClipSource, light: FrameLight): (frame: number, meter: FrameMeter, bytes: Uint8Array) => void {
  const table = createLightTable(clip.transfer, clip.range, clip.bitDepth)
  return (frame, meter, bytes) => {
    setLight(light, frame, meter)
    if (!lampPatch || !light.patch) return
    const luma = clip.bitDepth > 8 ? new Uint16Array(bytes.buffer, bytes.byteOffset, bytes.length / 2) : bytes
    const { counts, pixels } = meterFrame(luma, table, { rectangle: lampPatch, frameWidth: clip.width })
    light.patch[frame] = counts / pixels / countsPerWhite
  }
}

/** A sink that measures frames and sums nothing. */
export function lightSink(source: ClipSource, light: FrameLight): FrameSink & { finish: () => void } {
  const summer = new FrameSummer(kernelFor(source.clip), [], { read: unread, write: unread, meter: lightTaker(source, light) })
  return { slot: frame => summer.slot(frame), push: frame => summer.push(frame), finish: () => summer.finish() }
}

const unread = () => Promise.reject(new Error('Nothing is summed here'))

export interface SumRequest {
  source: ClipSource
  kernel: LightKernel
  groups: Group[]
  bases: SumFile[]
  /** Given: the whole clip is decoded and every frame's light is put here. Else only frames that are needed. */
  light?: FrameLight
  folder: string
}

/** Makes every group's sum as a file in the folder, with the least decoding. Answers the files and the frames decoded. */
export async function makeSums({ source, kernel, groups, bases, light, folder }: SumRequest, helpers: StageHelpers): Promise<{ sums: Map<string, SumFile>, frames: number }> {
  const { path, clip, index } = source
  for (const group of groups) assertSummable(group.frameCount)
  const tasks = planSums(groups, light ? [] : bases)
  const sums = new Map<string, SumFile>()
  const syncing: Promise<void>[] = []
  const fileOf = ({ target: { id, firstFrame, frameCount } }: Task, digest: SumDigest) => {
    const path = join(folder, id)
    sums.set(id, { path, firstFrame, frameCount, digest })
    return path
  }
  for (const task of tasks) if (!task.parts.length) await share(task.base!.path, fileOf(task, task.base!.digest))
  const summer = new FrameSummer(kernel, tasks, {
    read: async base => wordsOf(await readFile(base.path)),
    async write(task, image) {
      const bytes = new Uint8Array(image.buffer, image.byteOffset, image.byteLength)
      const file = await open(fileOf(task, digestOf(bytes)), 'w')
      await file.writeFile(bytes)
      // To the disk while decoding goes on, so that storing it later waits for nothing.
      syncing.push(file.sync().finally(() => file.close()))
    },
    ...light ? { meter: lightTaker(source, light) } : {},
  })
  const sink: FrameSink = { slot: frame => summer.slot(frame), push: frame => summer.push(frame) }
  const needed = framesNeeded(tasks)
  if (light) await decodeClip(path, clip, helpers, sink)
  else if (needed.length) await decodeRanges(path, clip, index, needed, helpers, sink)
  summer.finish()
  await Promise.all(syncing)
  return { sums, frames: light ? clip.frameCount : needed.reduce((sum, { frameCount }) => sum + frameCount, 0) }
}

const wordsOf = (bytes: Uint8Array) => new Uint32Array(bytes.buffer, bytes.byteOffset, bytes.byteLength / 4)

/** The same bytes under another name. Stored files are never written to, so a second link is as good as a copy. */
async function share(from: string, to: string): Promise<void> {
  await link(from, to).catch(() => copyFile(from, to))
}
