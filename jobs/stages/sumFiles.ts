import { copyFile, link, readFile, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { ClipFacts, Group } from '../../shared/measurement'
import { assertSummable } from '../imaging/accumulate'
import { framesNeeded, planSums, type FrameSpan, type SumTask } from '../imaging/sumPlan'
import { LightKernel } from '../kernels/lightKernel'
import type { FrameIndex } from '../media/frameIndex'
import { createLightTable } from '../media/transfer'
import { decodeClip, decodeRanges, type FrameSink } from './decode'
import { FrameSummer } from './frameSummer'
import { setLight, type FrameLight } from './lightFile'
import type { StageHelpers } from './stage'

export interface ClipSource {
  path: string
  clip: ClipFacts
  index: FrameIndex
}

/** A sum that exists as a file: raw little-endian uint32, height × width. */
export interface SumFile extends FrameSpan {
  path: string
}

type Task = SumTask<Group, SumFile>

export function kernelFor({ transfer, range, bitDepth, width, height }: ClipFacts): LightKernel {
  return new LightKernel(width * height, createLightTable(transfer, range, bitDepth))
}

/** A sink that measures frames and sums nothing. */
export function lightSink(kernel: LightKernel, light: FrameLight): FrameSink & { finish: () => void } {
  const summer = new FrameSummer(kernel, [], { read: unread, write: unread, meter: (frame, meter) => setLight(light, frame, meter) })
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
export async function makeSums({ source: { path, clip, index }, kernel, groups, bases, light, folder }: SumRequest, helpers: StageHelpers): Promise<{ sums: Map<string, SumFile>, frames: number }> {
  for (const group of groups) assertSummable(group.frameCount)
  const tasks = planSums(groups, light ? [] : bases)
  const sums = new Map<string, SumFile>()
  const fileOf = ({ target }: Task) => {
    const file = { path: join(folder, target.id), firstFrame: target.firstFrame, frameCount: target.frameCount }
    sums.set(target.id, file)
    return file.path
  }
  for (const task of tasks) if (!task.parts.length) await share(task.base!.path, fileOf(task))
  const summer = new FrameSummer(kernel, tasks, {
    read: async base => wordsOf(await readFile(base.path)),
    write: (task, image) => writeFile(fileOf(task), new Uint8Array(image.buffer, image.byteOffset, image.byteLength)),
    ...light ? { meter: (frame, meter) => setLight(light, frame, meter) } : {},
  })
  const sink: FrameSink = { slot: frame => summer.slot(frame), push: frame => summer.push(frame) }
  const needed = framesNeeded(tasks)
  if (light) await decodeClip(path, clip, helpers, sink)
  else if (needed.length) await decodeRanges(path, clip, index, needed, helpers, sink)
  summer.finish()
  return { sums, frames: light ? clip.frameCount : needed.reduce((sum, { frameCount }) => sum + frameCount, 0) }
}

const wordsOf = (bytes: Uint8Array) => new Uint32Array(bytes.buffer, bytes.byteOffset, bytes.byteLength / 4)

/** The same bytes under another name. Stored files are never written to, so a second link is as good as a copy. */
async function share(from: string, to: string): Promise<void> {
  await link(from, to).catch(() => copyFile(from, to))
}
