import { spawn } from 'node:child_process'
import { once } from 'node:events'
import type { Scenario } from './scenario'

const transferTags = { bt709: 'bt709', srgb: 'iec61966-2-1', linear: 'linear', gamma22: 'gamma22' } as const

/** ffmpeg said no; the message ends with what it said. */
export class EncodingError extends Error {
  override name = 'EncodingError'
}

function colourOptions({ camera, encoding }: Scenario): string[] {
  if (!encoding.tagged) return []
  return ['-color_range', camera.range === 'full' ? 'pc' : 'tv', '-color_trc', transferTags[camera.transfer], '-colorspace', 'bt709', '-color_primaries', 'bt709']
}

function encoderArguments(scenario: Scenario, clipPath: string, audioPath: string | null): string[] {
  const { camera, encoding, width, height } = scenario
  const pixelFormat = camera.bitDepth === 8 ? 'yuv420p' : 'yuv420p10le'
  const range = camera.range === 'full' ? 'pc' : 'tv'
  const quality = encoding.crf === 'lossless' ? ['-qp', '0'] : ['-crf', String(encoding.crf)]
  return [
    '-hide_banner', '-loglevel', 'error', '-y', '-fflags', '+bitexact',
    '-f', 'rawvideo', '-pix_fmt', pixelFormat, '-color_range', range, '-s', `${width}x${height}`, '-framerate', `${camera.frameRate.numerator}/${camera.frameRate.denominator}`, '-i', 'pipe:0',
    ...(audioPath ? ['-i', audioPath, '-map', '0:v', '-map', '1:a', '-c:a', encoding.audio!.codec, ...(encoding.audio!.codec === 'aac' ? ['-b:a', '192k'] : [])] : []),
    '-c:v', 'libx264', '-preset', encoding.preset, ...(encoding.tune ? ['-tune', encoding.tune] : []), '-threads', '1', ...quality, '-g', String(encoding.keyframeInterval), '-bf', String(encoding.bFrames),
    '-pix_fmt', pixelFormat, ...colourOptions(scenario), '-flags', '+bitexact', clipPath,
  ]
}

/** Encodes luma planes to H.264 with grey chroma. ffmpeg gets the very codes: no scaling, no range conversion. */
export async function encodeClip(scenario: Scenario, frames: Iterable<Uint8Array | Uint16Array>, clipPath: string, audioPath: string | null = null): Promise<void> {
  const child = spawn('ffmpeg', encoderArguments(scenario, clipPath, audioPath), { stdio: ['pipe', 'ignore', 'pipe'] })
  let said = ''
  child.stderr.on('data', (bytes: Buffer) => said = (said + bytes).slice(-2000))
  child.stdin.on('error', () => {})
  const closed = new Promise<number | null>((resolve, reject) => {
    child.once('error', reject)
    child.once('close', resolve)
  })
  closed.catch(() => {})
  const bytesPerSample = scenario.camera.bitDepth === 8 ? 1 : 2
  const chroma = Buffer.alloc(scenario.width * scenario.height / 2 * bytesPerSample)
  if (bytesPerSample === 1) chroma.fill(128)
  else new Uint16Array(chroma.buffer, chroma.byteOffset, chroma.length / 2).fill(512)
  for (const luma of frames) {
    if (child.stdin.destroyed || child.exitCode !== null) break
    child.stdin.write(Buffer.from(new Uint8Array(luma.buffer, luma.byteOffset, luma.byteLength)))
    if (!child.stdin.write(chroma)) await Promise.race([once(child.stdin, 'drain'), closed])
  }
  child.stdin.end()
  const code = await closed
  if (code !== 0) throw new EncodingError(`ffmpeg could not encode ${clipPath} (exit code ${code}). Read what it said: ${said.trim()}`)
}
