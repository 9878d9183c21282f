import { stat } from 'node:fs/promises'
import type { ClipFacts, CodeRange, Flag, Transfer } from '../../shared/measurement'
import { clipFlags } from './clipFlags'
import { resolveRange, resolveTransfer } from './colour'
import { findEntryFrames } from './entryFrames'
import { maximumPixels } from './ffmpegProcess'
import { examineFileEnd, type FileEnd } from './fileEnd'
import type { FrameIndex } from './frameIndex'
import { MediaError } from './mediaError'
import { openContainer } from './openContainer'
import { listPackets, type PacketList } from './packets'
import { lumaFormats } from './pixelFormats'
import { probeStreams, type VideoStream } from './streams'
import { judgeTimes } from './timestamps'

export interface ProbeResult {
  facts: ClipFacts
  flags: Flag[]
  /** Start of exposure of each decoded frame, in display order; the first is 0. */
  frameTimesSeconds: Float64Array
  /** For random access to the frames. */
  index: FrameIndex
  /** Compressed size of each frame, in display order. */
  frameBytes: Float64Array
}

/**
 * Find out what a clip is, and refuse what cannot be measured from.
 *
 * @throws MediaError whose message says what is wrong with the file and what to do
 */
export async function probeClip(path: string, settings: { transfer: Transfer, range: CodeRange }, signal?: AbortSignal): Promise<ProbeResult> {
  const file = await stat(path)
  if (!file.isFile()) throw new MediaError('not-video', 'This is not a file. Upload the clip as the camera recorded it.')
  if (file.size === 0) throw new MediaError('file-empty', 'The file is empty. Upload the clip again from the card.')
  const container = await openContainer(path, signal)
  // The packets are listed while the header is read and the packets are looked into: each is a pass over the whole file.
  const stop = new AbortController()
  const within = signal ? AbortSignal.any([signal, stop.signal]) : stop.signal
  const listing = listPackets(path, container, within)
  try {
    return await describeClip(path, container, settings, listing, within)
  } finally {
    stop.abort()
    await listing.catch(() => {})
  }
}

async function describeClip(path: string, container: string, settings: { transfer: Transfer, range: CodeRange }, listing: Promise<PacketList>, signal: AbortSignal): Promise<ProbeResult> {
  const { video, audioTracks } = await probeStreams(path)
  assertMeasurable(video)
  const entries = findEntryFrames(path, container, video.codec, listing, signal)
  entries.catch(() => {})
  const range = resolveRange(settings.range, video.colourRange, lumaFormats[video.pixelFormat].isGray)
  const transfer = resolveTransfer(settings.transfer, video.colourTransfer)
  const packets = await listing
  const frameCount = packets.ticks.length
  if (frameCount === 0) throw new MediaError('no-frames', 'The file holds no video frames. Copy the clip again from the card.')
  const times = packets.untimed ? judgeTimes(packets.ticks, invert(video.frameRates[0]), video.frameRates) : judgeTimes(packets.ticks, video.timeBase, video.frameRates)
  const { numerator, denominator } = times.frameRate
  const facts: ClipFacts = {
    container, codec: video.codec, width: video.width, height: video.height, pixelFormat: video.pixelFormat,
    bitDepth: lumaFormats[video.pixelFormat].bitDepth,
    frameRate: times.frameRate, frameRateHz: numerator / denominator,
    durationSeconds: times.frameTimesSeconds[frameCount - 1] + denominator / numerator,
    frameCount, containerFrameCount: video.frameCount, variableRate: times.variableRate,
    range: range.value, rangeSource: range.source, transfer: transfer.value, transferSource: transfer.source, audioTracks,
    bitsPerPixel: 8 * packets.bytes / (frameCount * video.width * video.height),
  }
  const end = await examineFileEnd(path, container)
  assertComplete(facts, video, end)
  const index: FrameIndex = { timeBase: video.timeBase, ticks: packets.ticks, keyFrames: packets.keyFrames, ...await entries }
  return { facts, flags: [...range.flags, ...transfer.flags, ...times.flags, ...clipFlags(facts, video, packets, end)], frameTimesSeconds: times.frameTimesSeconds, index, frameBytes: packets.frameBytes }
}

function assertMeasurable({ width, height, pixelFormat, codec }: VideoStream): void {
  if (!(width > 0 && height > 0)) throw new MediaError('no-video', 'The picture size cannot be found in the file. It may be damaged: upload it again from the card.')
  if (pixelFormat === 'unknown') throw new MediaError('not-decodable', `No frame of the ${codec} stream can be decoded. The file may be damaged: upload it again from the card.`)
  if (width * height > maximumPixels) throw new MediaError('picture-too-big', `A picture of ${width}×${height} is too big. Use at most ${Math.floor(maximumPixels / 1e6)} megapixels.`)
  if (!Object.hasOwn(lumaFormats, pixelFormat)) throw new MediaError('pixel-format', `Light cannot be measured from ${codec} in pixel format ${pixelFormat}. Record or export 8-bit or 10-bit YUV or grey.`)
}

/** A header that is off by a frame or two is flagged; a file that ends early is refused, with what it should hold. */
function assertComplete(facts: ClipFacts, video: VideoStream, end: FileEnd): void {
  const { frameCount, containerFrameCount } = facts
  const { missing, allowed } = containerFrameCount === null ? missingByLength(facts, video, end) : { missing: containerFrameCount - frameCount, allowed: 0 }
  if (missing > Math.max(2, 0.01 * frameCount, allowed)) throw new MediaError('clip-incomplete', `The file ends early: ${frameCount} of ${frameCount + missing} frames are there. Copy the clip again from the card and upload it.`)
  // A part that claims more than the file holds is no loss where every frame that the container counts is there.
  if (end.state === 'cut' && !(containerFrameCount !== null && missing <= 0)) throw new MediaError('clip-incomplete', `The file ends ${end.detail}: ${frameCount} frames are there, ${missing > 0 ? `${frameCount + missing} should be` : 'and how many are missing it does not say'}. Copy the clip again from the card and upload it.`)
}

/** Where frames are not counted, the stated length must be reached; gaps within the clip are no matter here. */
function missingByLength({ frameRateHz, durationSeconds, container, audioTracks }: ClipFacts, video: VideoStream, { expectedSeconds }: FileEnd): { missing: number, allowed: number } {
  if (expectedSeconds !== undefined) return { missing: Math.round((expectedSeconds - durationSeconds) * frameRateHz), allowed: audioTracks ? frameRateHz : 0 }
  // MOV's stated length follows its edit list. The length of the whole file may be that of its sound, which can go on a little.
  if (video.durationSeconds === null || container.split(',').includes('mov')) return { missing: 0, allowed: 0 }
  return { missing: Math.round((video.durationSeconds - durationSeconds) * frameRateHz), allowed: audioTracks ? frameRateHz : 0 }
}

const invert = (rate: { numerator: number, denominator: number } | undefined) => ({ numerator: rate?.denominator ?? 1, denominator: rate?.numerator ?? 25 })
