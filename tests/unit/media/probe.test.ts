import { execFileSync } from 'node:child_process'
import { readFileSync } from 'node:fs'
import { createServer } from 'node:net'
import { describe, expect, it } from 'vitest'
import { readFrames } from '../../../jobs/media/frames'
import { probeClip } from '../../../jobs/media/probe'
import { clipFolder, ffmpeg, h264 } from './clips'

const clips = clipFolder()
const auto = { transfer: 'auto', range: 'auto' } as const
const probe = (path: string) => probeClip(path, auto)
const flagCodes = async (path: string) => (await probe(path)).flags.map(({ code }) => code)
const declared = ['-color_range', 'tv', '-color_trc', 'bt709']
const refusedAs = (code: string) => expect.objectContaining({ name: 'MediaError', code })
/** Enough bytes and keyframes that a cut leaves frames on both sides. */
const rich = ['-preset', 'ultrafast', '-crf', '8', '-g', '5']
const large = { size: '160x120' }
const cut = (path: string, share: number) => clips.write(`cut-${Math.round(share * 100)}-${path.split('/').at(-1)}`, readFileSync(path).subarray(0, Math.floor(share * readFileSync(path).length)))

describe('facts of a clip', () => {
  it('are read from an H.264 MP4 with B-frames', async () => {
    const { facts, flags, frameTimesSeconds } = await probe(clips.make('plain.mp4', [...h264, ...declared, '-crf', '10'], { rate: '30000/1001', seconds: 2 }))
    expect(facts).toMatchObject({
      codec: 'h264', width: 64, height: 48, pixelFormat: 'yuv420p', bitDepth: 8, frameRate: { numerator: 30_000, denominator: 1001 }, frameCount: 60, containerFrameCount: 60,
      variableRate: false, range: 'limited', rangeSource: 'stream', transfer: 'bt709', transferSource: 'stream', audioTracks: 0,
    })
    expect(flags).toEqual([])
    expect(frameTimesSeconds[59]).toBeCloseTo(59 * 1001 / 30_000, 12)
    expect(facts.durationSeconds).toBeCloseTo(60 * 1001 / 30_000, 9)
  })

  it('know 10 bits and full range', async () => {
    expect((await probe(clips.make('ten.mkv', ['-c:v', 'libx265', '-x265-params', 'log-level=error', '-pix_fmt', 'yuv422p10le', '-color_range', 'pc']))).facts).toMatchObject({ pixelFormat: 'yuv422p10le', bitDepth: 10, range: 'full', rangeSource: 'stream', codec: 'hevc' })
  })

  it('count packets where the container does not count', async () => {
    const { facts, flags } = await probe(clips.make('stream.ts', [...h264, ...declared, '-crf', '10']))
    expect(facts).toMatchObject({ frameCount: 50, containerFrameCount: null, container: 'mpegts' })
    expect(flags).toMatchObject([{ code: 'end-unproven', severity: 'problem' }])
  })

  it.each(['avi', 'mkv', 'mov'])('give %s the exact constant rate', async (kind) => {
    const { facts, frameTimesSeconds } = await probe(clips.make(`rate.${kind}`, [...h264, '-bf', '0'], { rate: '30000/1001' }))
    expect(facts).toMatchObject({ frameRate: { numerator: 30_000, denominator: 1001 }, variableRate: false, frameCount: 30 })
    expect(frameTimesSeconds[29]).toBeCloseTo(29 * 1001 / 30_000, 12)
  })

  it('flag what was assumed, audio tracks and a low bit rate', async () => {
    ffmpeg('-f', 'lavfi', '-i', 'color=gray:size=320x240:rate=50:duration=1', '-f', 'lavfi', '-i', 'sine=duration=1', ...h264, '-c:a', 'aac', clips.path('audio.mp4'))
    const { facts, flags } = await probe(clips.path('audio.mp4'))
    expect(facts.audioTracks).toBe(1)
    expect(flags.map(({ code }) => code).sort()).toEqual(['audio-tracks', 'low-bit-rate', 'range-assumed', 'transfer-assumed'])
  })

  it('flag a variable rate, and keep every frame and its time', async () => {
    const path = clips.make('variable.mkv', [...h264, '-vf', 'settb=1/1000,setpts=\'20*N+8*sin(N)\'', '-fps_mode', 'passthrough', '-enc_time_base', '1/1000'])
    const { facts, frameTimesSeconds } = await probe(path)
    expect(facts).toMatchObject({ variableRate: true, frameCount: 50 })
    expect(await flagCodes(path)).toContain('variable-rate')
    expect(frameTimesSeconds[7]).toBeCloseTo((7 + 0.4 * Math.sin(7)) / 50, 2)
  })

  it('show frames that were dropped within a clip, and do not take it for cut off', async () => {
    const { facts, flags } = await probe(clips.make('dropped.mkv', [...h264, '-bf', '0', '-vf', 'select=\'lt(n,60)+gt(n,69)\'', '-fps_mode', 'passthrough'], { seconds: 3 }))
    expect(facts).toMatchObject({ frameCount: 140, variableRate: false })
    expect(flags.find(({ code }) => code === 'timestamp-gaps')?.message).toMatch(/^10 frames are missing in 1 gap, the first before frame 60/)
  })

  it('count the frames that an edit list hides', async () => {
    const whole = clips.make('whole.mp4', h264)
    ffmpeg('-ss', '0.3', '-i', whole, '-c', 'copy', clips.path('edited.mp4'))
    const { facts, flags, frameTimesSeconds } = await probe(clips.path('edited.mp4'))
    expect(facts.frameCount).toBe(50)
    expect(frameTimesSeconds.length).toBe(50)
    expect(flags.find(({ code }) => code === 'edit-list')?.message).toMatch(/hide 15 of 50 frames/)
    const read = await readFrames(clips.path('edited.mp4'), facts, {}, () => undefined)
    expect(read.frameCount).toBe(50)
  })

  it('flag interlaced pictures and pixels that are not square', async () => {
    expect(await flagCodes(clips.make('interlaced.mov', [...h264, '-flags', '+ilme+ildct', '-x264-params', 'tff=1', '-vf', 'setsar=4/3,setfield=tff']))).toEqual(expect.arrayContaining(['interlaced', 'pixel-aspect']))
  })
})

describe('a clip is refused', () => {
  it.each([
    ['a text named .mp4', () => clips.write('text.mp4', 'Frames were shot on Tuesday.\n'.repeat(40)), 'not-video'],
    ['random bytes', () => clips.write('noise.mp4', Uint8Array.from({ length: 5000 }, (_, i) => (i * 7919) % 251)), 'not-video'],
    ['an empty file', () => clips.write('empty.mp4', ''), 'file-empty'],
    ['sound alone', () => {
      ffmpeg('-f', 'lavfi', '-i', 'sine=duration=1', '-c:a', 'aac', clips.path('sound.mp4'))
      return clips.path('sound.mp4')
    }, 'no-video'],
    ['12 bits', () => clips.make('twelve.mkv', ['-c:v', 'ffv1', '-pix_fmt', 'yuv420p12le']), 'pixel-format'],
    ['RGB', () => clips.make('rgb.avi', ['-c:v', 'ffv1', '-pix_fmt', 'bgr0']), 'pixel-format'],
    ['a picture file', () => clips.make('still.png', ['-frames:v', '1']), 'container-unsupported'],
    ['36 megapixels', () => {
      ffmpeg('-f', 'lavfi', '-i', 'color=black:size=8100x4500', '-frames:v', '1', '-c:v', 'mpeg4', clips.path('big.avi'))
      return clips.path('big.avi')
    }, 'picture-too-big'],
    ['an MP4 whose index is missing', () => cut(clips.make('late.mp4', [...h264, ...rich], large), 0.6), 'clip-incomplete'],
    ['an MP4 whose index promises more frames', () => cut(clips.make('early.mp4', [...h264, ...rich, '-movflags', '+faststart'], large), 0.6), 'clip-incomplete'],
    ['an MKV cut at 60 %', () => cut(clips.make('cut.mkv', [...h264, ...rich], large), 0.6), 'clip-incomplete'],
    ['an AVI cut at 60 %', () => cut(clips.make('cut.avi', [...h264, ...rich, '-bf', '0'], large), 0.6), 'clip-incomplete'],
    ['a curve that cannot be inverted', () => clips.make('pq.mp4', [...h264, '-color_trc', 'smpte2084']), 'transfer-unsupported'],
  ])('when it is %s', async (_, make, code) => {
    await expect(probe(make())).rejects.toThrow(refusedAs(code))
  })

  it('with the frames that are there and those that should be', async () => {
    await expect(probe(clips.path('cut-60-early.mp4'))).rejects.toThrow(/\d+ of 50 frames/)
  })

  it('as soon as the signal is aborted', async () => {
    const reason = new Error('cancelled')
    await expect(probeClip(clips.make('aborted.mp4', h264), auto, AbortSignal.abort(reason))).rejects.toBe(reason)
  })
})

describe('a playlist named .mp4', () => {
  const target = clips.make('target.mp4', h264)
  const plain = { container: 'mov', width: 64, height: 48, bitDepth: 8 }

  it('would be followed by ffprobe without the closed list of demuxers', () => {
    clips.write('open.mp4', 'ffconcat version 1.0\nfile target.mp4\n')
    expect(execFileSync('ffprobe', ['-v', 'error', '-show_entries', 'stream=codec_name', '-of', 'csv=p=0', clips.path('open.mp4')], { encoding: 'utf8' }).trim()).toBe('h264')
  })

  it('is refused by probe and by the frame reader, and nothing it names is opened', async () => {
    let connections = 0
    const server = createServer((socket) => {
      connections++
      socket.destroy()
    })
    await new Promise<void>(ready => server.listen(0, '127.0.0.1', ready))
    const address = server.address() as { port: number }
    const http = `http://127.0.0.1:${address.port}/clip.mp4`
    const lists = {
      'hls-file': `#EXTM3U\n#EXT-X-TARGETDURATION:10\n#EXTINF:10,\nfile://${target}\n#EXT-X-ENDLIST\n`,
      'hls-http': `#EXTM3U\n#EXT-X-TARGETDURATION:10\n#EXTINF:10,\n${http}\n#EXT-X-ENDLIST\n`,
      'ffconcat': 'ffconcat version 1.0\nfile target.mp4\n',
      'dash': `<?xml version="1.0"?><MPD xmlns="urn:mpeg:dash:schema:mpd:2011" type="static" mediaPresentationDuration="PT1S" profiles="urn:mpeg:dash:profile:isoff-on-demand:2011"><Period><AdaptationSet mimeType="video/mp4"><Representation id="1" bandwidth="1"><BaseURL>${http}</BaseURL></Representation></AdaptationSet></Period></MPD>`,
      'sdp': `v=0\no=- 0 0 IN IP4 127.0.0.1\ns=x\nc=IN IP4 127.0.0.1\nt=0 0\nm=video ${address.port} RTP/AVP 96\na=rtpmap:96 H264/90000\n`,
    }
    try {
      for (const [name, text] of Object.entries(lists)) {
        const path = clips.write(`${name}.mp4`, text)
        await expect(probe(path), name).rejects.toThrow(refusedAs('playlist-refused'))
        let frames = 0
        await expect(readFrames(path, { ...plain, container: '' }, {}, () => void frames++), name).rejects.toThrow(refusedAs('decode-failed'))
        expect(frames, name).toBe(0)
      }
    } finally {
      await new Promise(closed => server.close(closed))
    }
    expect(connections).toBe(0)
  })
})
