import { execFileSync } from 'node:child_process'
import { createHash } from 'node:crypto'
import { describe, expect, it } from 'vitest'
import { readFrameRanges } from '../../jobs/media/frameRanges'
import { readFrames } from '../../jobs/media/frames'
import { readKeyFrames } from '../../jobs/media/keyFrames'
import { probeClip } from '../../jobs/media/probe'
import { clipFolder } from '../unit/media/clips'

const clips = clipFolder()
const probe = (path: string) => probeClip(path, { transfer: 'auto', range: 'auto' })
const digest = (luma: Uint8Array | Uint16Array) => createHash('md5').update(new Uint8Array(luma.buffer, luma.byteOffset, luma.byteLength)).digest('hex')

/** Seeded: mulberry32 (Tommy Ettinger, 2017; public domain). */
function seeded(seed: number): () => number {
  return () => {
    seed = (seed + 0x6D2B79F5) | 0
    let t = Math.imul(seed ^ (seed >>> 15), 1 | seed)
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t
    return ((t ^ (t >>> 14)) >>> 0) / 2 ** 32
  }
}

const x264 = (params: string) => ['-c:v', 'libx264', '-preset', 'veryfast', '-pix_fmt', 'yuv420p', '-x264-params', params]
const x265 = (params: string) => ['-c:v', 'libx265', '-preset', 'ultrafast', '-pix_fmt', 'yuv420p', '-x265-params', `log-level=error:${params}`]
const vary = ['-vf', 'settb=1/1000,setpts=\'20*N+8*sin(N)\'', '-fps_mode', 'passthrough', '-enc_time_base', '1/1000']

/** Name, file, encoder options, whether seeking must work (few decoded frames) or a decode from the start is accepted. */
const kinds: [string, string, string[], 'seeks' | 'counts'][] = [
  ['H.264, closed groups, B-frames', 'closed.mp4', x264('keyint=25:bframes=3:open-gop=0'), 'seeks'],
  ['H.264, open groups', 'open.mp4', x264('keyint=20:min-keyint=20:bframes=3:open-gop=1:scenecut=0'), 'seeks'],
  ['H.264, open groups, MKV', 'open.mkv', x264('keyint=20:min-keyint=20:bframes=3:open-gop=1:scenecut=0'), 'seeks'],
  ['H.264, open groups, transport stream', 'open.ts', x264('keyint=20:min-keyint=20:bframes=3:open-gop=1:scenecut=0'), 'seeks'],
  ['H.264, closed groups, transport stream', 'closed.ts', x264('keyint=25:bframes=3'), 'seeks'],
  ['H.264, one group of 600', 'long.mp4', x264('keyint=600:bframes=5:b-adapt=2:scenecut=0'), 'seeks'],
  ['H.264, intra refresh', 'refresh.mp4', x264('keyint=30:intra-refresh=1:bframes=0'), 'counts'],
  ['H.264, variable rate', 'vary.mkv', [...x264('keyint=20:bframes=3'), ...vary], 'seeks'],
  ['H.264 of 10 bits, MOV', 'ten.mov', ['-c:v', 'libx264', '-preset', 'veryfast', '-pix_fmt', 'yuv422p10le', '-g', '24'], 'seeks'],
  ['H.264 in AVI', 'h264.avi', x264('keyint=20:bframes=2'), 'counts'],
  ['H.264, fragmented', 'fragmented.mp4', [...x264('keyint=25:bframes=3'), '-movflags', '+frag_keyframe+empty_moov+default_base_moof'], 'seeks'],
  ['H.265, open groups', 'open265.mp4', x265('keyint=20:min-keyint=20:bframes=4:open-gop=1:scenecut=0'), 'seeks'],
  ['H.265, open groups, MKV', 'open265.mkv', x265('keyint=20:min-keyint=20:bframes=4:open-gop=1:scenecut=0'), 'seeks'],
  ['H.265, open groups, transport stream', 'open265.ts', x265('keyint=20:min-keyint=20:bframes=4:open-gop=1:scenecut=0'), 'seeks'],
  ['H.265 of 10 bits, closed groups', 'ten265.mp4', ['-c:v', 'libx265', '-preset', 'ultrafast', '-pix_fmt', 'yuv420p10le', '-x265-params', 'log-level=error:keyint=25:open-gop=0'], 'seeks'],
  ['MPEG-2, open groups, program stream', 'two.mpg', ['-c:v', 'mpeg2video', '-q:v', '3', '-bf', '2', '-g', '15'], 'counts'],
  ['MPEG-2, open groups, transport stream', 'two.ts', ['-c:v', 'mpeg2video', '-q:v', '3', '-bf', '2', '-g', '15'], 'seeks'],
  ['MPEG-2, open groups, MKV', 'two.mkv', ['-c:v', 'mpeg2video', '-q:v', '3', '-bf', '2', '-g', '15'], 'seeks'],
  ['MPEG-4 part 2, MP4', 'part2.mp4', ['-c:v', 'mpeg4', '-q:v', '3', '-bf', '2', '-g', '30'], 'seeks'],
  ['MPEG-4 part 2, AVI', 'part2.avi', ['-c:v', 'mpeg4', '-q:v', '3', '-g', '30'], 'seeks'],
  ['MPEG-4 part 2 with B-frames, AVI', 'part2b.avi', ['-c:v', 'mpeg4', '-q:v', '3', '-bf', '2', '-g', '30'], 'counts'],
  ['MJPEG, AVI', 'motion.avi', ['-c:v', 'mjpeg', '-pix_fmt', 'yuvj422p', '-q:v', '3'], 'seeks'],
  ['ProRes, MOV', 'prores.mov', ['-c:v', 'prores_ks', '-pix_fmt', 'yuv422p10le'], 'seeks'],
  ['FFV1, MKV', 'ffv1.mkv', ['-c:v', 'ffv1', '-level', '3', '-g', '12'], 'seeks'],
]

const size = { size: '162x90' }

describe.each(kinds)('%s', (_, name, options, expectation) => {
  it('gives by random access the frames of the full decode, and those are ffmpeg’s own', async () => {
    const seconds = name.startsWith('long') ? 13 : 4
    const path = clips.make(name, options, { ...size, rate: '50', seconds })
    const { facts, index } = await probe(path)
    const whole: string[] = []
    await readFrames(path, facts, {}, luma => void whole.push(digest(luma)))
    const lines = execFileSync('ffmpeg', ['-v', 'error', ...facts.container.includes('mov') ? ['-ignore_editlist', '1'] : [], '-i', path, '-map', '0:V:0', '-vf', 'extractplanes=y', '-fps_mode', 'passthrough', '-f', 'framemd5', '-'], { encoding: 'utf8' }).split('\n').filter(line => line && !line.startsWith('#'))
    expect(whole).toEqual(lines.map(line => line.split(',').at(-1)!.trim()))
    expect(whole.length).toBe(50 * seconds)
    expect(index.ticks.length).toBe(whole.length)

    const random = seeded(name.length * 7919 + name.charCodeAt(0))
    let failedRuns = 0
    for (let trial = 0; trial < 6; trial++) {
      const ranges = Array.from({ length: 1 + Math.floor(3 * random()) }, () => {
        const firstFrame = Math.floor(random() * (whole.length - 1))
        return { firstFrame, frameCount: 1 + Math.floor(random() * Math.min(trial < 3 ? 5 : 40, whole.length - firstFrame)) }
      })
      const asked = [...new Set(ranges.flatMap(({ firstFrame, frameCount }) => Array.from({ length: frameCount }, (_, i) => firstFrame + i)))].sort((a, b) => a - b)
      const got: [number, string][] = []
      const result = await readFrameRanges(path, facts, index, ranges, trial % 2 ? { threads: 1 } : {}, (luma, frame) => void got.push([frame, digest(luma)]))
      expect(got).toEqual(asked.map(frame => [frame, whole[frame]]))
      expect(result).toMatchObject({ frameCount: asked.length, errorLines: [] })
      failedRuns += result.failedRuns
    }
    if (expectation === 'seeks') expect({ failedRuns, entries: index.entryFrames.length > 0 }).toEqual({ failedRuns: 0, entries: true })

    const keys: [number, string][] = []
    await readKeyFrames(path, facts, index, {}, (luma, frame) => void keys.push([frame, digest(luma)]))
    expect(keys.sort(([a], [b]) => a - b)).toEqual([...index.entryFrames].map(frame => [frame, whole[frame]]))
  })
})
