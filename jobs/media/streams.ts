import ffmpeg from 'fluent-ffmpeg'
import { inputFile, inputLimits } from './ffmpegProcess'
import { MediaError } from './mediaError'

export interface Rational {
  numerator: number
  denominator: number
}

/** What the header says of the video stream that is measured: the first that is not a cover picture. */
export interface VideoStream {
  codec: string
  width: number
  height: number
  pixelFormat: string
  colourRange: string | undefined
  colourTransfer: string | undefined
  /** Rates the header states, the likelier first. */
  frameRates: Rational[]
  timeBase: Rational
  /** Null where the container does not count. */
  frameCount: number | null
  /** Length with the edit list applied; null where it is not stated. */
  durationSeconds: number | null
  interlaced: boolean
  squarePixels: boolean
}

type Fields = Record<string, unknown>

/**
 * Facts of the streams by ffprobe.
 *
 * fluent-ffmpeg's ffprobe cannot be aborted and has no time limit: call it for a file that `openContainer` has opened.
 */
export async function probeStreams(path: string): Promise<{ video: VideoStream, audioTracks: number }> {
  const { streams, format } = await new Promise<{ streams: Fields[], format: Fields }>((settle, reject) => {
    ffmpeg.ffprobe(inputFile(path), ['-v', 'error', ...inputLimits], (error: Error | null, data) => {
      if (error) reject(new MediaError('not-video', 'The file’s streams cannot be read. It may be damaged: upload it again from the card.', { cause: error, stderrTail: error.message }))
      else settle(data as unknown as { streams: Fields[], format: Fields })
    })
  })
  const video = streams.find(stream => stream.codec_type === 'video' && (stream.disposition as Fields | undefined)?.attached_pic !== 1)
  if (!video) throw new MediaError('no-video', 'The file holds no video stream. Upload the clip as the camera recorded it.')
  return { video: videoStream(video, format), audioTracks: streams.filter(stream => stream.codec_type === 'audio').length }
}

function videoStream(stream: Fields, format: Fields): VideoStream {
  const tags = (stream.tags ?? {}) as Fields
  return {
    codec: String(stream.codec_name ?? 'unknown'),
    width: Number(stream.width), height: Number(stream.height),
    pixelFormat: String(stream.pix_fmt ?? 'unknown'),
    colourRange: known(stream.color_range), colourTransfer: known(stream.color_transfer),
    frameRates: [stream.r_frame_rate, stream.avg_frame_rate].flatMap(rate => rational(rate) ?? []),
    timeBase: rational(stream.time_base) ?? { numerator: 1, denominator: 1_000_000 },
    frameCount: positive(stream.nb_frames) ?? positive(tags.NUMBER_OF_FRAMES),
    durationSeconds: positive(stream.duration) ?? clock(tags.DURATION) ?? positive(format.duration),
    interlaced: !['progressive', 'unknown', undefined].includes(stream.field_order as string | undefined),
    squarePixels: ['1:1', '0:1', 'N/A', undefined].includes(stream.sample_aspect_ratio as string | undefined),
  }
}

const known = (value: unknown) => typeof value === 'string' && value !== 'unknown' && value !== 'N/A' ? value : undefined

function positive(value: unknown): number | null {
  const number = Number(value)
  return number > 0 ? number : null
}

/** "50/1"; ffprobe writes 0/0 for what it does not know. */
function rational(value: unknown): Rational | null {
  const [numerator, denominator] = String(value).split('/').map(Number)
  return numerator > 0 && denominator > 0 ? { numerator, denominator } : null
}

/** "00:01:02.500000000" in seconds. */
function clock(value: unknown): number | null {
  const [, hours, minutes, seconds] = /^(\d+):(\d+):([\d.]+)$/.exec(String(value)) ?? []
  return seconds === undefined ? null : Number(hours) * 3600 + Number(minutes) * 60 + Number(seconds)
}
