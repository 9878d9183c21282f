import { execFileSync } from 'node:child_process'
import { createHash } from 'node:crypto'
import { describe, expect, it } from 'vitest'
import { meterFrame } from '../../jobs/imaging/accumulate'
import { readFrames } from '../../jobs/media/frames'
import { probeClip } from '../../jobs/media/probe'
import { createLightTable } from '../../jobs/media/transfer'
import { clipFolder, ffmpeg } from '../unit/media/clips'

const clips = clipFolder()
const output = (program: string, ...args: string[]) => execFileSync(program, ['-hide_banner', '-v', 'error', ...args], { encoding: 'utf8', maxBuffer: 1 << 28 })

const kinds: [string, string, number, string[]][] = [
  ['H.264 with B-frames, limited range', 'limited.mp4', 8, ['-c:v', 'libx264', '-pix_fmt', 'yuv420p', '-color_range', 'tv', '-crf', '18']],
  ['H.264 with B-frames, full range', 'full.mov', 8, ['-vf', 'scale=out_range=full', '-c:v', 'libx264', '-pix_fmt', 'yuvj420p', '-color_range', 'pc', '-crf', '18']],
  ['H.264 of 10 bits', 'ten.mkv', 10, ['-c:v', 'libx264', '-pix_fmt', 'yuv420p10le', '-color_range', 'tv', '-crf', '18']],
  ['HEVC of 10 bits 4:2:2', 'hevc.mp4', 10, ['-c:v', 'libx265', '-x265-params', 'log-level=error', '-pix_fmt', 'yuv422p10le', '-color_range', 'tv']],
  ['ProRes', 'prores.mov', 10, ['-c:v', 'prores_ks', '-pix_fmt', 'yuv422p10le']],
  ['MJPEG in AVI', 'motion.avi', 8, ['-c:v', 'mjpeg', '-pix_fmt', 'yuvj422p', '-q:v', '3']],
  ['MPEG-4 in a transport stream', 'part2.ts', 8, ['-c:v', 'mpeg4', '-pix_fmt', 'yuv420p', '-q:v', '3', '-bf', '2']],
]

/** Every frame's luma digest and mean code, as the reader hands them over. */
async function ours(path: string, threads?: number) {
  const { facts } = await probeClip(path, { transfer: 'auto', range: 'auto' })
  const digests: string[] = []
  const means: number[] = []
  await readFrames(path, facts, { threads }, (luma) => {
    digests.push(createHash('md5').update(new Uint8Array(luma.buffer, luma.byteOffset, luma.byteLength)).digest('hex'))
    let sum = 0
    for (const code of luma) sum += code
    means.push(sum / luma.length)
  })
  return { facts, digests, means }
}

describe.each(kinds)('%s', (_, name, bitDepth, options) => {
  it('gives the frames that ffmpeg’s framemd5 sees behind extractplanes, and signalstats’ means', async () => {
    ffmpeg('-f', 'lavfi', '-i', 'testsrc2=size=322x182:rate=25:duration=1.4', ...options, clips.path(name))
    const path = clips.path(name)
    const { facts, digests, means } = await ours(path)
    expect(facts.bitDepth).toBe(bitDepth)
    const lines = output('ffmpeg', '-i', path, '-map', '0:V:0', '-vf', 'extractplanes=y', '-fps_mode', 'passthrough', '-f', 'framemd5', '-').split('\n').filter(line => line && !line.startsWith('#'))
    expect(digests).toEqual(lines.map(line => line.split(',').at(-1)!.trim()))
    expect(digests.length).toBe(35)
    expect(facts.frameCount).toBe(35)
    // Means of the decoder's own pixels, without extractplanes or any conversion; signalstats prints whole or six digits.
    const averages = output('ffprobe', '-f', 'lavfi', '-i', `movie=${path},signalstats`, '-show_entries', 'frame_tags=lavfi.signalstats.YAVG', '-of', 'csv=p=0').trim().split('\n').map(Number)
    expect(averages.length).toBe(35)
    averages.forEach((average, i) => expect(Math.abs(means[i] - average)).toBeLessThan(1e-3 * average))
    for (const threads of [1, 2, 7]) expect((await ours(path, threads)).digests, `${threads} threads`).toEqual(digests)
  })
})

it('the meter’s light of a flat grey frame is the table’s value at signalstats’ mean code', async () => {
  const path = clips.path('grey.mkv')
  ffmpeg('-f', 'lavfi', '-i', 'color=0x808080:size=64x48:rate=25:duration=0.2', '-c:v', 'ffv1', '-pix_fmt', 'yuv420p', '-color_range', 'tv', path)
  const [code] = output('ffprobe', '-f', 'lavfi', '-i', `movie=${path},signalstats`, '-show_entries', 'frame_tags=lavfi.signalstats.YAVG', '-of', 'csv=p=0').trim().split('\n').map(Number)
  const table = createLightTable('bt709', 'limited', 8)
  const { facts } = await probeClip(path, { transfer: 'auto', range: 'auto' })
  let frames = 0
  await readFrames(path, facts, {}, (luma) => {
    frames++
    expect(meterFrame(luma, table).counts).toBe(64 * 48 * table.counts[code])
  })
  expect(frames).toBe(5)
})
