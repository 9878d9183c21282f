import { execFileSync } from 'node:child_process'
import { mkdtempSync, readFileSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, describe, expect, it } from 'vitest'
import { probeClip } from '../../jobs/media/probe'
import { emptyLight } from '../../jobs/stages/lightFile'
import { kernelFor, makeSums, type ClipSource, type SumFile } from '../../jobs/stages/sumFiles'
import type { Group } from '../../shared/measurement'
import { clipFolder } from '../unit/media/clips'
import { random } from '../unit/imaging/pictures'

const clips = clipFolder()
const root = mkdtempSync(join(tmpdir(), 'lampsum-recut-'))
afterAll(() => rmSync(root, { recursive: true, force: true }))
let folders = 0
const helpers = (path: string) => ({ signal: new AbortController().signal, workDir: path, progress: () => {}, log: () => {} })
const newFolder = () => mkdtempSync(join(root, `${folders++}-`))

const group = (id: string, firstFrame: number, frameCount: number): Group => ({ id, line: 1, frequencyHz: 100, repetition: 1, role: 'phase', lampPhaseDeg: 0, depth: 1, firstFrame, frameCount, accepted: true, flags: [] })

async function sums(source: ClipSource, groups: Group[], bases: SumFile[], whole: boolean) {
  const folder = newFolder()
  return makeSums({ source, kernel: kernelFor(source.clip), groups, bases, folder, ...whole ? { light: emptyLight(source.clip.frameCount) } : {} }, helpers(folder))
}

/** Sums by numpy from ffmpeg's raw luma and the formula of Rec. ITU-R BT.709-6 item 1.2. */
function numpySum(path: string, { clip }: ClipSource, { firstFrame, frameCount }: Group): Buffer {
  const script = `
import subprocess, sys, numpy as np
w, h, bits, first, count = map(int, sys.argv[2:7])
step = 2 ** (bits - 8)
edits = ['-ignore_editlist', '1'] if sys.argv[1].endswith('mp4') else []
raw = subprocess.run(['ffmpeg', '-v', 'error', *edits, '-i', sys.argv[1], '-vf', 'extractplanes=y', '-fps_mode', 'passthrough', '-f', 'rawvideo', '-'], check=True, capture_output=True).stdout
luma = np.frombuffer(raw, np.uint8 if bits == 8 else np.uint16).reshape(-1, h, w)
v = (np.arange(2 ** bits) / step - 16) / 219
e = np.where(v < 0.081, v / 4.5, ((np.maximum(v, 0) + 0.099) / 1.099) ** (1 / 0.45))
table = np.floor(50000 * np.maximum(e, 0) + 0.5).astype(np.uint32)
sys.stdout.buffer.write(table[luma[first:first + count]].sum(axis=0, dtype=np.uint32).tobytes())`
  return execFileSync('/usr/bin/python3', ['-c', script, path, String(clip.width), String(clip.height), String(clip.bitDepth), String(firstFrame), String(frameCount)], { maxBuffer: 1 << 26 })
}

const tagged = ['-color_range', 'tv', '-color_trc', 'bt709', '-colorspace', 'bt709', '-color_primaries', 'bt709']
const kinds: [string, string, string[]][] = [
  ['H.264, groups of 250 with B-frames', 'long.mp4', ['-c:v', 'libx264', '-preset', 'veryfast', '-pix_fmt', 'yuv420p', '-x264-params', 'keyint=250:bframes=3:scenecut=0']],
  ['H.264, open groups', 'open.mp4', ['-c:v', 'libx264', '-preset', 'veryfast', '-pix_fmt', 'yuv420p', '-x264-params', 'keyint=20:min-keyint=20:bframes=3:open-gop=1:scenecut=0']],
  ['H.265 of 10 bits, open groups', 'ten.mp4', ['-c:v', 'libx265', '-preset', 'ultrafast', '-pix_fmt', 'yuv420p10le', '-x265-params', 'log-level=error:keyint=20:min-keyint=20:bframes=4:open-gop=1:scenecut=0']],
  ['MPEG-2 in a transport stream', 'two.ts', ['-c:v', 'mpeg2video', '-pix_fmt', 'yuv420p', '-q:v', '3', '-bf', '2', '-g', '15']],
]

describe.each(kinds)('%s', (_, name, options) => {
  it('sums by difference equal a full run, bit for bit, over random edits, and numpy', async () => {
    const path = clips.make(name, [...options, ...tagged], { size: '162x90', seconds: 8 })
    const { facts, index } = await probeClip(path, { transfer: 'bt709', range: 'limited' })
    const source = { path, clip: facts, index, lampPatch: null }
    const next = random(facts.codec.length)
    const between = (low: number, high: number) => low + Math.floor(next() * (high - low + 1))
    let groups = [group('a', 10, 80), group('b', 95, 90), group('c', 190, 100), group('d', 300, 90)]
    let made = (await sums(source, groups, [], true)).sums
    for (let edit = 0; edit < 3; edit++) {
      groups = groups.map(({ id, firstFrame, frameCount }) => {
        const first = Math.max(0, firstFrame + between(-4, 4))
        return group(id, first, Math.min(facts.frameCount - first, frameCount + between(-6, 6)))
      })
      const byDifference = await sums(source, groups, [...made.values()], false)
      const anew = await sums(source, groups, [], true)
      expect(byDifference.frames, 'frames decoded for it').toBeLessThan(80)
      for (const { id } of groups) expect(readFileSync(byDifference.sums.get(id)!.path).equals(readFileSync(anew.sums.get(id)!.path)), `edit ${edit}, group ${id}`).toBe(true)
      made = byDifference.sums
    }
    for (const each of groups.slice(0, 1)) expect(readFileSync(made.get(each.id)!.path).equals(numpySum(path, source, each)), each.id).toBe(true)
  }, 120_000)
})
