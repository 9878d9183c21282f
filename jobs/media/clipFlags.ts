import type { ClipFacts, Flag } from '../../shared/measurement'
import type { FileEnd } from './fileEnd'
import type { PacketList } from './packets'
import type { VideoStream } from './streams'

/** Common practice: consumer cameras spend 0.2 to 0.5 bits a pixel; below this, compression shows in the sums. */
export const lowBitsPerPixel = 0.1

/** What a person should know of a clip beyond its times and colours. */
export function clipFlags(facts: ClipFacts, video: VideoStream, packets: PacketList, end: FileEnd): Flag[] {
  const flags: Flag[] = []
  const add = (code: string, severity: Flag['severity'], message: string) => flags.push({ code, severity, message })
  if (packets.untimed) add('timestamps-missing', 'warning', `The container holds no frame times: ${facts.frameRateHz.toFixed(3)} frames/s without gaps are assumed.`)
  if (facts.containerFrameCount !== null && facts.containerFrameCount !== facts.frameCount) add('frame-count-differs', 'problem', `The container claims ${facts.containerFrameCount} frames and holds ${facts.frameCount}. Check that the copy is complete.`)
  if (isEndUnproven(facts, video, end)) add('end-unproven', 'problem', `Nothing in this file says how long it should be, so a copy that ended early would look the same: ${facts.frameCount} frames, ${facts.durationSeconds.toFixed(2)} s. Compare that with the camera’s display, or record to MP4, MOV, MKV or AVI.`)
  if (end.state === 'cut') add('end-cut', 'problem', `The file ends ${end.detail}, though the ${facts.frameCount} frames that it counts are there. Check that the copy is complete.`)
  const hidden = hiddenFrames(facts, video)
  if (hidden > 0) add('edit-list', 'note', `The file’s edit list would hide ${hidden} of ${facts.frameCount} frames. All of them are read, and clip time 0 is the first stored frame.`)
  if (hidden < 0) add('edit-list', 'note', 'The file’s edit list would repeat or delay frames. Every stored frame is read once, and clip time 0 is the first stored frame.')
  if (video.interlaced) add('interlaced', 'problem', 'The clip is interlaced: each frame mixes two exposures. Set the camera to progressive (p, not i).')
  if (!video.squarePixels) add('pixel-aspect', 'warning', 'The clip’s pixels are not square. Displacements in pixels differ along x and y: record with square pixels.')
  if (packets.errorLines.length) add('container-damaged', 'problem', `Reading the file met errors: ${packets.errorLines[0]}. Copy it again from the card.`)
  if (facts.bitsPerPixel < lowBitsPerPixel) add('low-bit-rate', 'warning', `Only ${facts.bitsPerPixel.toFixed(3)} bits a pixel: strong compression biases the displacement and adds noise. Set the camera to its highest bit rate.`)
  if (facts.audioTracks) add('audio-tracks', 'note', `The clip has ${facts.audioTracks} audio ${facts.audioTracks === 1 ? 'track, which is' : 'tracks, which are'} not used.`)
  return flags
}

/** Streams state no length, nor do files that were written live; what ffprobe gives is then the last frame's time. */
function isEndUnproven({ container, containerFrameCount }: ClipFacts, video: VideoStream, { state, expectedSeconds }: FileEnd): boolean {
  if (state !== 'unknown' || containerFrameCount !== null || expectedSeconds !== undefined) return false
  const measuredOnly = ['mov', 'avi', 'mpegts', 'mpeg'].some(name => container.split(',').includes(name))
  return measuredOnly || video.durationSeconds === null
}

/** Frames by which the stored frames outlast the stream's length after its edit list; negative when it is longer. */
function hiddenFrames({ container, frameCount, frameRateHz, durationSeconds }: ClipFacts, video: VideoStream): number {
  if (!container.split(',').includes('mov') || video.durationSeconds === null || frameCount < 2) return 0
  const frames = (durationSeconds - video.durationSeconds) * frameRateHz
  return Math.abs(frames) < 0.6 ? 0 : Math.round(frames)
}
