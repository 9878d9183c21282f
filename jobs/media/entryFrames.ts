import { inputFile, inputLimits, editListOptions, runProcess } from './ffmpegProcess'
import type { PacketList } from './packets'
import { passLimits } from './processLimits'
import { scanRecoveryPoints } from './recoveryPoints'

/** Codecs whose key frames let every frame shown at or after them be decoded without what lies before. */
const exactKeyFrames = new Set(['mpeg1video', 'mpeg2video', 'mpeg4', 'ffv1', 'vp8', 'vp9', 'mjpeg', 'prores', 'dnxhd', 'rawvideo', 'huffyuv', 'ffvhuff', 'utvideo', 'magicyuv', 'v210', 'jpeg2000', 'cfhd'])

/** Types of network abstraction units after which nothing refers to what came before: Rec. ITU-T H.264 table 7-1 (IDR), H.265 table 7-1 (BLA, IDR, CRA). */
const resetUnits: Record<string, string> = { h264: '5', hevc: '16-21' }

/**
 * Of the key frames that the container marks, those where decoding can begin and be exact for every later frame in
 * display order. In H.264 and H.265 the mark alone says too little, so the packets are looked into, without decoding.
 */
export async function findEntryFrames(path: string, container: string, codec: string, listing: Promise<PacketList>, signal?: AbortSignal): Promise<{ entryFrames: Int32Array, needsRunUp: boolean }> {
  const none = { entryFrames: new Int32Array(0), needsRunUp: false }
  const looking = Object.hasOwn(resetUnits, codec) ? resetTicks(path, container, resetUnits[codec], signal) : null
  looking?.catch(() => {})
  const packets = await listing
  const { keyFrames, ticks } = packets
  // Without times of its own, a frame that comes out of the decoder can only be told by counting from the start.
  if (packets.untimed || (packets.decodeTimesOnly && keyFrames.length !== ticks.length)) return none
  if (exactKeyFrames.has(codec)) return { entryFrames: distinct(ticks, keyFrames), needsRunUp: false }
  if (!looking) return none
  const resets = await looking
  const atReset = keyFrames.filter(frame => resets.has(ticks[frame]))
  if (codec === 'hevc' || atReset.length === keyFrames.length) return { entryFrames: distinct(ticks, atReset), needsRunUp: false }
  const exact = await scanRecoveryPoints(path, container, keyFrames.length, signal)
  if (!exact) return { entryFrames: distinct(ticks, atReset), needsRunUp: false }
  const recovering = new Set(packets.keysInDecodingOrder.filter((_, i) => exact[i]))
  return { entryFrames: distinct(ticks, keyFrames.filter(frame => resets.has(ticks[frame]) || recovering.has(frame))), needsRunUp: true }
}

/** Frames whose tick no other frame bears. */
const distinct = (ticks: Float64Array, frames: Int32Array) => frames.filter(frame => ticks[frame] !== ticks[frame - 1] && ticks[frame] !== ticks[frame + 1])

/** Presentation ticks of the packets that hold a unit of these types. */
async function resetTicks(path: string, container: string, types: string, signal?: AbortSignal): Promise<Set<number>> {
  const ticks = new Set<number>()
  let partial = ''
  const { exitCode } = await runProcess('ffmpeg', [
    '-nostdin', '-hide_banner', '-v', 'error', ...inputLimits, ...editListOptions(container), '-copyts', '-i', inputFile(path),
    '-map', '0:V:0', '-c', 'copy', '-copyinkf', '-bsf:v', `filter_units=pass_types=${types}`, '-avoid_negative_ts', 'disabled', '-f', 'framecrc', 'pipe:1',
  ], {
    signal, ...await passLimits(path),
    onOutput: async (stdout) => {
      for await (const chunk of stdout.setEncoding('utf8')) {
        const lines = (partial + chunk).split('\n')
        partial = lines.pop()!
        for (const line of lines) if (!line.startsWith('#')) ticks.add(Number(line.split(',')[2]))
      }
    },
  })
  return exitCode === 0 ? ticks : new Set()
}
