import { runProcess } from './ffmpegProcess'
import { MediaError } from './mediaError'

/** ffmpeg's version as it states it, for the manifest: it belongs to what reproduces a frame set. */
export async function ffmpegVersion(): Promise<string> {
  let text = ''
  await runProcess('ffmpeg', ['-version'], {
    timeoutSeconds: 10,
    onOutput: async (stdout) => {
      for await (const chunk of stdout.setEncoding('utf8')) text += chunk
    },
  })
  const version = /^ffmpeg version (\S+)/.exec(text)?.[1]
  if (!version) throw new MediaError('ffmpeg-missing', 'ffmpeg does not tell its version. Install Debian’s package ffmpeg.')
  return version
}
