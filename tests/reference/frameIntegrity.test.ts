import { execFileSync } from 'node:child_process'
import { readFileSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { readFrames } from '../../jobs/media/frames'
import { probeClip } from '../../jobs/media/probe'
import { clipFolder, ffmpeg, h264 } from '../unit/media/clips'

const clips = clipFolder()
const probe = (path: string) => probeClip(path, { transfer: 'auto', range: 'auto' })
const ffprobe = (...args: string[]) => execFileSync('ffprobe', ['-v', 'quiet', '-select_streams', 'V:0', '-of', 'csv=p=0', ...args], { encoding: 'utf8', maxBuffer: 1 << 26 }).split('\n').map(line => line.replace(/,+$/, '')).filter(line => /^[\d.-]+$/.test(line))
const packetsIn = (path: string) => ffprobe('-ignore_editlist', '1', '-show_entries', 'packet=pos', path).length
const packetsInAny = (path: string) => path.endsWith('.mp4') || path.endsWith('.mov') ? packetsIn(path) : ffprobe('-show_entries', 'packet=pos', path).length

const rich = [...h264, '-preset', 'ultrafast', '-crf', '8', '-g', '10']
const fragments = '+frag_keyframe+empty_moov+default_base_moof'
const large = { size: '160x120', rate: '50', seconds: 4 }
/** What a file cut anywhere must come to: `refused`, or where the kind allows it a flag that asks for review. */
const kinds: [string, string, string[], 'refused' | 'told'][] = [
  ['MP4 with its index in front', 'front.mp4', [...rich, '-movflags', '+faststart'], 'refused'],
  ['MP4 with its index behind', 'behind.mp4', rich, 'refused'],
  ['MOV', 'front.mov', ['-c:v', 'prores_ks', '-pix_fmt', 'yuv422p10le', '-movflags', '+faststart'], 'refused'],
  ['MKV', 'whole.mkv', rich, 'refused'],
  ['MKV written live', 'live.mkv', [...rich, '-live', '1'], 'told'],
  ['AVI', 'whole.avi', [...rich, '-bf', '0'], 'refused'],
  ['fragmented MP4', 'fragments.mp4', [...rich, '-movflags', fragments], 'told'],
  ['fragmented MP4 with a segment index', 'index.mp4', [...rich, '-movflags', `${fragments}+global_sidx`], 'refused'],
  ['fragmented MP4 of segments', 'segments.mp4', [...rich, '-movflags', `${fragments}+dash+skip_trailer`], 'told'],
  ['transport stream', 'whole.ts', rich, 'told'],
  ['program stream', 'whole.mpg', ['-c:v', 'mpeg2video', '-q:v', '2', '-bf', '2'], 'told'],
]

/** `refused` with got and expected, `told` by a flag of severity problem, or `passed`. */
async function outcome(path: string): Promise<{ kind: 'refused' | 'told' | 'passed', message: string }> {
  try {
    const { flags } = await probe(path)
    const problems = flags.filter(({ severity }) => severity === 'problem')
    return { kind: problems.length ? 'told' : 'passed', message: problems.map(({ message }) => message).join(' ') }
  } catch (error) {
    expect(error).toMatchObject({ name: 'MediaError', code: 'clip-incomplete' })
    return { kind: 'refused', message: (error as Error).message }
  }
}

describe.each(kinds)('%s', (_, name, options, least) => {
  it('never passes for whole when it is cut, wherever that is, and says how many frames it has', async () => {
    const bytes = readFileSync(clips.make(name, options, large))
    for (const share of [0.05, 0.6, 0.99]) {
      const path = clips.write(`cut-${share}-${name}`, bytes.subarray(0, Math.floor(share * bytes.length)))
      const { kind, message } = await outcome(path)
      expect(kind, `${share}: ${message}`).not.toBe('passed')
      if (least === 'refused') expect(kind, `${share}: ${message}`).toBe('refused')
      if (/no index/.test(message)) continue
      const got = packetsInAny(path)
      expect(message, String(share)).toMatch(new RegExp(`\\b${got}\\b`))
      if (least === 'refused') expect(message, String(share)).toMatch(/\b200\b/)
    }
  })

  it('passes when it is whole, and asks for review only where its kind has no end', async () => {
    const { flags, facts } = await probe(clips.path(name))
    expect(facts.frameCount).toBe(200)
    const unproven = /\.(ts|mpg)$/.test(name) || name === 'live.mkv' || name === 'segments.mp4'
    expect(flags.filter(({ severity }) => severity === 'problem').map(({ code }) => code)).toEqual(unproven ? ['end-unproven'] : [])
  })
})

/** Ends of the parts (ISO/IEC 14496-12 boxes) of a file. */
function boxEnds(bytes: Buffer): [string, number][] {
  const ends: [string, number][] = []
  for (let at = 0; at < bytes.length;) {
    const type = bytes.toString('latin1', at + 4, at + 8)
    at += bytes.readUInt32BE(at)
    ends.push([type, at])
  }
  return ends
}

it('a fragmented MP4 cut exactly behind a fragment is told, or refused where an index names its length', async () => {
  for (const [name, kind] of [['fragments.mp4', 'told'], ['segments.mp4', 'told'], ['index.mp4', 'refused']] as const) {
    const bytes = readFileSync(clips.path(name))
    const ends = boxEnds(bytes).filter(([type]) => type === 'mdat')
    const path = clips.write(`even-${name}`, bytes.subarray(0, ends[Math.floor(0.6 * ends.length)][1]))
    expect(await outcome(path), name).toMatchObject({ kind })
  }
})

it('a transport stream cut exactly behind a packet is told', async () => {
  const bytes = readFileSync(clips.path('whole.ts'))
  expect(await outcome(clips.write('even.ts', bytes.subarray(0, 188 * Math.floor(0.6 * bytes.length / 188))))).toMatchObject({ kind: 'told' })
})

it('an MKV whose segment states no size is told when a whole cluster is missing', async () => {
  const bytes = readFileSync(clips.path('live.mkv'))
  const cluster = Buffer.from([0x1f, 0x43, 0xb6, 0x75])
  expect(await outcome(clips.write('even.mkv', bytes.subarray(0, bytes.lastIndexOf(cluster))))).toMatchObject({ kind: 'told' })
})

describe('flipped bytes', () => {
  it.each([
    ['H.264', 'flip.mp4', h264], ['H.264 in a transport stream', 'flip.ts', h264], ['H.265', 'flip265.mp4', ['-c:v', 'libx265', '-x265-params', 'log-level=error', '-pix_fmt', 'yuv420p']],
    ['MPEG-2', 'flip.mpg', ['-c:v', 'mpeg2video', '-q:v', '3', '-bf', '2']], ['MPEG-4', 'flip.avi', ['-c:v', 'mpeg4', '-q:v', '3']], ['FFV1', 'flip.mkv', ['-c:v', 'ffv1', '-level', '3', '-slicecrc', '1']],
  ] as const)('in %s are found by the decoder or before it', async (_, name, options) => {
    const bytes = readFileSync(clips.make(name, [...options], large))
    // The middle half is all pictures, wherever the index lies.
    for (let at = Math.floor(bytes.length / 4); at < 3 * bytes.length / 4; at += 1009) bytes[at] ^= 0x5a
    const path = clips.write(`flipped-${name}`, bytes)
    const found = await probe(path).then(async ({ facts }) => {
      const { errorLines, frameCount } = await readFrames(path, facts, {}, () => undefined)
      return errorLines.length + Math.abs(frameCount - facts.frameCount)
    }, error => error.name === 'MediaError' ? 1 : 0)
    expect(found).toBeGreaterThan(0)
  })
})

describe('frame times', () => {
  const variable = 'settb=1/1000,setpts=\'20*N+8*sin(N)\''
  it.each([
    ['constant, MP4', 'constant.mp4', h264], ['constant, transport stream', 'constant.ts', h264],
    ['variable, MKV', 'variable.mkv', [...h264, '-vf', variable, '-fps_mode', 'passthrough', '-enc_time_base', '1/1000']],
    ['variable, MP4', 'variable.mp4', [...h264, '-vf', variable, '-fps_mode', 'passthrough', '-enc_time_base', '1/1000']],
    ['with 10 frames left out, MOV', 'gap.mov', [...h264, '-vf', 'select=\'lt(n,60)+gt(n,69)\'', '-fps_mode', 'passthrough']],
  ] as const)('are those of ffprobe’s decoded frames, each once: %s', async (_, name, options) => {
    const path = clips.make(name, [...options], large)
    const { facts, frameTimesSeconds } = await probe(path)
    const times = ffprobe('-show_entries', 'frame=best_effort_timestamp_time', path).map(Number)
    expect(facts.frameCount).toBe(times.length)
    expect((await readFrames(path, facts, {}, () => undefined)).frameCount).toBe(times.length)
    times.forEach((time, i) => expect(Math.abs(frameTimesSeconds[i] - (time - times[0]))).toBeLessThan(1.1e-3))
  })

  it('keep every stored frame behind an edit list, as ffprobe does when told to ignore it', async () => {
    ffmpeg('-ss', '0.5', '-i', clips.path('constant.mp4'), '-c', 'copy', clips.path('edited.mp4'))
    const path = clips.path('edited.mp4')
    const { facts, flags } = await probe(path)
    const shown = ffprobe('-show_entries', 'frame=pts', path).length
    const stored = ffprobe('-ignore_editlist', '1', '-show_entries', 'frame=pts', path).length
    expect(stored).toBeGreaterThan(shown)
    expect(facts.frameCount).toBe(stored)
    expect((await readFrames(path, facts, {}, () => undefined)).frameCount).toBe(stored)
    expect(flags.find(({ code }) => code === 'edit-list')?.message).toContain(`hide ${stored - shown} of ${stored} frames`)
  })

  it('that repeat are told, and no frame is lost or doubled', async () => {
    const path = clips.make('repeat.mkv', ['-c:v', 'ffv1', '-vf', 'settb=1/1000,setpts=\'20*(N-eq(mod(N,7),3))\'', '-fps_mode', 'passthrough', '-enc_time_base', '1/1000'], large)
    const { facts, flags } = await probe(path)
    const stored = ffprobe('-show_entries', 'packet=pts', path).length
    expect(facts.frameCount).toBe(stored)
    expect((await readFrames(path, facts, {}, () => undefined)).frameCount).toBe(stored)
    expect(flags.find(({ code }) => code === 'repeated-timestamps')).toMatchObject({ severity: 'problem' })
  })
})

it.each([['smaller', '96x64'], ['turned', '120x160'], ['larger', '320x240']])('a picture that becomes %s in mid-stream is refused with why', async (_, size) => {
  const parts = [clips.make('one.ts', h264, { ...large, seconds: 1 }), clips.make(`two-${size}.ts`, h264, { ...large, size, seconds: 1 })]
  const path = clips.write(`joined-${size}.ts`, Buffer.concat(parts.map(part => readFileSync(part))))
  const { facts } = await probe(path)
  await expect(readFrames(path, facts, {}, () => undefined)).rejects.toThrow(/picture size changes/)
})
