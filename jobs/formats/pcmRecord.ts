import type { Flag } from '../../shared/measurement'
import { GrowingFloat32 } from './growingFloat32'
import { RecordError } from './recordError'
import type { RecordData } from './recordTable'

export interface PcmOptions {
  /** Interleaved channels. */
  channels: number
  sampleRateHz: number
  /** From 0; the loudest when left out. */
  channel?: number
  /** Clip time of the first sample; containers may start sound and picture apart. */
  startSeconds?: number
}

const float32Bytes = 4
const clipLevel = 0.999
const silence = 1e-4

/**
 * The clip's own sound as a record of one channel, the illumination: a photodiode on the camera's microphone input.
 *
 * Audio inputs block the steady part, so the channel says how the light swings but not how bright it is: flagged
 * `ac-coupled` always, `audio-clipped` when samples reach full scale, `audio-silent` when none exceeds 1e-4 of it.
 * Values lie in [−1, 1] of full scale and have no unit. Memory: four bytes a sample and channel until the channel is chosen.
 *
 * @param chunks interleaved float32, little-endian, in pieces of any size: what `ffmpeg -f f32le` writes
 * @throws RecordError `too-short`, `unknown-column`, `not-a-number`
 */
export async function pcmRecord(chunks: AsyncIterable<Uint8Array>, { channels, sampleRateHz, channel, startSeconds = 0 }: PcmOptions): Promise<RecordData> {
  if (channel !== undefined && !(Number.isInteger(channel) && channel >= 0 && channel < channels)) throw new RecordError('unknown-column', `The sound has no channel number ${channel}; its ${channels} channels count from 0.`)
  const kept = Array.from({ length: channels }, (_, index) => channel === undefined || channel === index ? { index, values: new GrowingFloat32(), power: 0, peak: 0, clipped: 0 } : null)
  let samples = 0
  for await (const frames of wholeFrames(chunks, channels)) {
    for (const track of kept) if (track) addTrack(track, frames, channels, samples)
    samples += frames.length / channels
  }
  if (samples < 2) throw new RecordError('too-short', `The clip’s sound has ${samples} samples. Upload the record as a file, or take another clip.`)
  const loudest = kept.reduce((best, track) => track && (!best || track.power > best.power) ? track : best, null)!
  return {
    format: 'audio', description: `The clip’s sound, ${channels === 1 ? 'one channel' : `${channels} channels`}`, sampleRateHz, startSeconds, rows: samples,
    columns: Array.from({ length: channels }, (_, index) => ({ index, name: `channel ${index + 1}`, header: '', unit: null })),
    channels: [{ role: 'illumination', name: `channel ${loudest.index + 1}`, unit: null, data: loudest.values.take() }],
    flags: flagsOf(loudest, channel === undefined && channels > 1, samples),
  }
}

interface Track {
  index: number
  values: GrowingFloat32
  power: number
  peak: number
  clipped: number
}

function addTrack(track: Track, frames: Float32Array, channels: number, before: number): void {
  for (let at = track.index; at < frames.length; at += channels) {
    const value = frames[at]
    const size = Math.abs(value)
    if (!(size < Infinity)) throw new RecordError('not-a-number', `Sample ${before + (at - track.index) / channels} of the clip’s sound is no number. Upload the record as a file instead.`)
    track.values.push(value)
    track.power += size * size
    if (size > track.peak) track.peak = size
    if (size >= clipLevel) track.clipped++
  }
}

function flagsOf({ index, peak, clipped }: Track, guessed: boolean, samples: number): Flag[] {
  const flags: Flag[] = [{ code: 'ac-coupled', severity: 'warning', message: 'The lamp signal is the clip’s own sound, which holds no steady light: its level is taken from the frames. Record the photodiode on a data-acquisition input for exact levels.' }]
  if (guessed) flags.push({ code: 'columns-guessed', severity: 'note', message: `The lamp signal is taken from the sound’s channel ${index + 1}, the loudest. If that is wrong, say which channel it is.` })
  if (clipped) flags.push({ code: 'audio-clipped', severity: 'warning', message: `${clipped} of ${samples} samples of the sound reach full scale, so the lamp signal is cut off there. Turn the input down, with its automatic level off, and record again.` })
  if (peak < silence) flags.push({ code: 'audio-silent', severity: 'problem', message: 'The sound holds no signal. Check the cable from the photodiode to the camera.' })
  return flags
}

/** Aligned float32 of whole frames out of bytes in any pieces; a part frame at the end is dropped. */
async function* wholeFrames(chunks: AsyncIterable<Uint8Array>, channels: number): AsyncGenerator<Float32Array> {
  const frameBytes = float32Bytes * channels
  let carry = new Uint8Array(0)
  for await (const chunk of chunks) {
    const bytes = new Uint8Array(carry.length + chunk.length)
    bytes.set(carry)
    bytes.set(chunk, carry.length)
    const whole = bytes.length - bytes.length % frameBytes
    carry = bytes.slice(whole)
    if (whole) yield new Float32Array(bytes.buffer, 0, whole / float32Bytes)
  }
}
