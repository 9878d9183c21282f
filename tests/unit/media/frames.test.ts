import { readdirSync, readFileSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { readFrames, type ReadableClip } from '../../../jobs/media/frames'
import { probeClip } from '../../../jobs/media/probe'
import { ffmpegVersion } from '../../../jobs/media/version'
import { clipFolder, ffmpeg, h264 } from './clips'

const clips = clipFolder()
const facts = async (path: string) => (await probeClip(path, { transfer: 'auto', range: 'auto' })).facts
const small: ReadableClip = { container: 'mov', width: 64, height: 48, bitDepth: 8 }

/** Processes that have the path on their command line. */
const runningWith = (path: string) => readdirSync('/proc').filter(entry => /^\d+$/.test(entry)).filter((pid) => {
  try {
    return readFileSync(`/proc/${pid}/cmdline`, 'utf8').split('\0')[0] === 'ffmpeg' && readFileSync(`/proc/${pid}/cmdline`, 'utf8').includes(path)
  } catch {
    return false
  }
})

/** A stream whose every luma code is known: frame n holds codes (7n + x + 3y) modulo the number of codes. */
function knownRaw(width: number, height: number, frames: number, bits: 8 | 10, chroma: number): Uint8Array {
  const codes = 2 ** bits
  const plane = width * height
  const data = bits === 8 ? new Uint8Array(frames * (plane + chroma)) : new Uint16Array(frames * (plane + chroma))
  for (let frame = 0; frame < frames; frame++) {
    const at = frame * (plane + chroma)
    for (let i = 0; i < plane; i++) data[at + i] = (7 * frame + i % width + 3 * Math.floor(i / width)) % codes
    data.fill(codes / 2, at + plane, at + plane + chroma)
  }
  return new Uint8Array(data.buffer)
}

describe('frame reader', () => {
  it.each([
    ['yuv420p', 'tv', 8, 0.5], ['yuv420p', 'pc', 8, 0.5], ['yuv422p', 'tv', 8, 1], ['yuv444p', 'tv', 8, 2], ['gray', 'pc', 8, 0],
    ['yuv420p10le', 'tv', 10, 0.5], ['yuv422p10le', 'tv', 10, 1], ['yuv444p10le', 'pc', 10, 2], ['gray10le', 'pc', 10, 0],
  ] as const)('hands over the very codes of %s in range %s', async (format, range, bits, chroma) => {
    const raw = knownRaw(36, 20, 5, bits, 36 * 20 * chroma)
    clips.write('known.raw', raw)
    const path = clips.path(`known-${format}-${range}.mkv`)
    ffmpeg('-f', 'rawvideo', '-pix_fmt', format, '-s', '36x20', '-r', '50', '-i', clips.path('known.raw'), '-c:v', 'ffv1', '-color_range', range, path)
    const clip = await facts(path)
    expect(clip).toMatchObject({ bitDepth: bits, width: 36, height: 20 })
    let wrong = 0
    const { frameCount, errorLines } = await readFrames(path, clip, {}, (luma, frame) => {
      expect(luma).toBeInstanceOf(bits === 8 ? Uint8Array : Uint16Array)
      luma.forEach((code, i) => wrong += code === (7 * frame + i % 36 + 3 * Math.floor(i / 36)) % 2 ** bits ? 0 : 1)
    })
    expect({ frameCount, errorLines, wrong }).toEqual({ frameCount: 5, errorLines: [], wrong: 0 })
  })

  it('hands over nv12 untouched', async () => {
    clips.write('nv.raw', knownRaw(36, 20, 5, 8, 36 * 20 / 2))
    ffmpeg('-f', 'rawvideo', '-pix_fmt', 'nv12', '-s', '36x20', '-r', '50', '-i', clips.path('nv.raw'), '-c:v', 'rawvideo', clips.path('nv.avi'))
    const clip = await facts(clips.path('nv.avi'))
    expect(clip.pixelFormat).toBe('nv12')
    let wrong = 0
    await readFrames(clips.path('nv.avi'), clip, {}, (luma, frame) => luma.forEach((code, i) => wrong += code === (7 * frame + i % 36 + 3 * Math.floor(i / 36)) % 256 ? 0 : 1))
    expect(wrong).toBe(0)
  })

  it('does not turn a picture that the camera marked as turned', async () => {
    ffmpeg('-i', clips.make('upright.mp4', h264), '-c', 'copy', '-metadata:s:v', 'rotate=90', clips.path('turned.mp4'))
    const rows = async (path: string) => {
      let first: number[] = []
      await readFrames(path, small, { frameCount: 1 }, luma => void (first = [...luma]))
      return first
    }
    expect(await rows(clips.path('turned.mp4'))).toEqual(await rows(clips.path('upright.mp4')))
  })

  it('hands over every frame once where timestamps repeat or the rate varies', async () => {
    for (const [name, pts] of [['repeat', '20*(N-eq(mod(N,7),3))'], ['vary', '20*N+8*sin(N)']]) {
      const path = clips.make(`${name}.mkv`, ['-c:v', 'ffv1', '-vf', `settb=1/1000,setpts='${pts}'`, '-fps_mode', 'passthrough', '-enc_time_base', '1/1000'])
      const clip = await facts(path)
      expect(clip.frameCount, name).toBe(50)
      expect(await readFrames(path, clip, {}, () => undefined), name).toMatchObject({ frameCount: 50, errorLines: [] })
    }
  })

  it('waits for a slow consumer, in order', async () => {
    const path = clips.make('slow.mp4', h264)
    const seen: number[] = []
    let open = 0
    await readFrames(path, small, {}, async (_, index) => {
      expect(++open).toBe(1)
      await new Promise(settle => setTimeout(settle, index % 10 === 0 ? 20 : 0))
      seen.push(index)
      open--
    })
    expect(seen).toEqual([...Array(50).keys()])
  })

  it('hands over a range of frames with their own indices', async () => {
    const path = clips.make('range.mp4', h264)
    const all: string[] = []
    const digest = (luma: Uint8Array | Uint16Array) => Array.from(luma).reduce((sum, code, i) => (sum * 31 + code + i) % 1_000_003, 7).toString()
    await readFrames(path, small, {}, luma => void all.push(digest(luma)))
    const part: [number, string][] = []
    expect((await readFrames(path, small, { firstFrame: 12, frameCount: 5 }, (luma, index) => void part.push([index, digest(luma)]))).frameCount).toBe(5)
    expect(part).toEqual([12, 13, 14, 15, 16].map(index => [index, all[index]]))
    expect((await readFrames(path, small, { firstFrame: 48, frameCount: 10, threads: 1 }, () => undefined)).frameCount).toBe(2)
  })

  it('ends ffmpeg at once when it is cancelled, with the signal’s reason', async () => {
    const path = clips.make('long.mp4', h264, { size: '320x240', seconds: 10 })
    const controller = new AbortController()
    const reason = new Error('cancelled by a person')
    let frames = 0
    await expect(readFrames(path, { ...small, width: 320, height: 240 }, { signal: controller.signal }, () => {
      if (++frames === 3) {
        expect(runningWith(path)).toHaveLength(1)
        controller.abort(reason)
      }
    })).rejects.toBe(reason)
    expect(runningWith(path)).toEqual([])
    expect(frames).toBeLessThan(100)
  })

  it('ends ffmpeg when the consumer throws, with its error', async () => {
    const failure = new Error('disk full')
    await expect(readFrames(clips.path('long.mp4'), { ...small, width: 320, height: 240 }, {}, () => {
      throw failure
    })).rejects.toBe(failure)
    expect(runningWith(clips.path('long.mp4'))).toEqual([])
  })

  it('is not begun when the signal is aborted already', async () => {
    const reason = new Error('too late')
    await expect(readFrames(clips.path('long.mp4'), small, { signal: AbortSignal.abort(reason) }, () => undefined)).rejects.toBe(reason)
  })

  it('refuses a clip whose picture size changes', async () => {
    const parts = [clips.make('one.ts', h264), clips.make('two.ts', h264, { size: '32x32' })]
    const path = clips.write('joined.ts', Buffer.concat(parts.map(part => readFileSync(part))))
    await expect(readFrames(path, { ...small, container: 'mpegts' }, {}, () => undefined)).rejects.toThrow(expect.objectContaining({ code: 'size-changes' }))
  })

  it('refuses a size that is not the clip’s', async () => {
    await expect(readFrames(clips.make('size.mp4', h264), { ...small, height: 47 }, {}, () => undefined)).rejects.toThrow(expect.objectContaining({ name: 'MediaError' }))
  })

  it('tells of damaged frames though ffmpeg ends well', async () => {
    const bytes = readFileSync(clips.make('damaged.mkv', [...h264, '-crf', '10']))
    for (let at = 3000; at < bytes.length - 200; at += 997) bytes[at] ^= 0xff
    const { errorLines, stderrTail } = await readFrames(clips.write('flipped.mkv', bytes), { ...small, container: 'matroska' }, {}, () => undefined)
    expect(errorLines.length).toBeGreaterThan(0)
    expect(errorLines.length).toBeLessThanOrEqual(50)
    expect(stderrTail.length).toBeLessThanOrEqual(8192)
  })

  it('carries ffmpeg’s last words in the error for what is not a clip', async () => {
    await expect(readFrames(clips.write('none.mp4', 'nothing'), small, {}, () => undefined)).rejects.toThrow(expect.objectContaining({ code: 'decode-failed', stderrTail: expect.stringContaining('moov atom not found') }))
  })
})

it('ffmpeg tells its version', async () => {
  expect(await ffmpegVersion()).toMatch(/^\d+\.\d+/)
})
