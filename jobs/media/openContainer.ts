import { open, stat } from 'node:fs/promises'
import { inputFile, inputLimits, maximumPixels, runProcess } from './ffmpegProcess'
import { MediaError } from './mediaError'
import { probeLimits } from './processLimits'

const readable = 'Upload MP4, MOV, MKV, AVI, MXF or an MPEG stream.'
/** Opening reads headers and the first frames only. */
const timeoutSeconds = 60
/** Demuxers that open what a text names: other files, other addresses. */
const lists = new Set(['hls', 'concat', 'dash', 'sdp', 'rtsp', 'imf', 'webm_dash_manifest', 'asf_o', 'tedcaptions'])

/** ffmpeg's words when `-max_pixels` stops a decoder; the container may open all the same. */
const tooBig = /exceeds specified max pixel count/

/**
 * Open the file as ffmpeg would, within limits, and answer its demuxer's names ("mov,mp4,m4a,3gp,3g2,mj2").
 *
 * @throws MediaError saying what the file is instead
 */
export async function openContainer(path: string, signal?: AbortSignal): Promise<string> {
  let text = ''
  const { exitCode, stderrTail } = await runProcess('ffprobe', ['-hide_banner', '-v', 'error', ...inputLimits, '-show_entries', 'format=format_name', '-of', 'default=nw=1:nk=1', inputFile(path)], {
    signal, timeoutSeconds, limits: probeLimits((await stat(path)).size),
    onOutput: async (stdout) => {
      for await (const chunk of stdout.setEncoding('utf8')) text += chunk
    },
  })
  const container = text.trim()
  if (exitCode === 0 && container && !tooBig.test(stderrTail)) return container
  throw await refusal(path, stderrTail)
}

async function refusal(path: string, stderrTail: string): Promise<MediaError> {
  const details = { stderrTail }
  const refused = /\[(\w+)[^\]]*\] Format not on whitelist/.exec(stderrTail)?.[1]
  if (refused && lists.has(refused)) return new MediaError('playlist-refused', `This is not a video but a list (${refused}) that points to other files; nothing it names was opened. Upload the video itself.`, details)
  if (refused) return new MediaError('container-unsupported', `This is a file of the kind “${refused}”, which is not read here. ${readable}`, details)
  if (tooBig.test(stderrTail)) return new MediaError('picture-too-big', `The picture is too big. Use at most ${Math.floor(maximumPixels / 1e6)} megapixels.`, details)
  if (/moov atom not found/.test(stderrTail) && await beginsAsQuickTime(path)) return new MediaError('clip-incomplete', 'The file has no index: the camera did not finish it, or the copy ended early. Copy it again from the card, or let the camera repair it.', details)
  return new MediaError('not-video', `This is not a video file. ${readable}`, details)
}

/** Whether the file begins with an atom of the QuickTime family (ISO/IEC 14496-12). */
async function beginsAsQuickTime(path: string): Promise<boolean> {
  const file = await open(path)
  try {
    const { buffer, bytesRead } = await file.read(Buffer.alloc(8), 0, 8, 0)
    return bytesRead === 8 && ['ftyp', 'mdat', 'free', 'skip', 'wide', 'pnot'].includes(buffer.toString('latin1', 4, 8))
  } finally {
    await file.close()
  }
}
