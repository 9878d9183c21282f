import { spawn, execFileSync } from 'node:child_process'
import { openSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { runProcess } from '../../../jobs/media/ffmpegProcess'
import { decodeLimits, limitedCommand } from '../../../jobs/media/processLimits'
import { probeClip } from '../../../jobs/media/probe'
import { clipFolder } from './clips'

const clips = clipFolder()
const endless = ['-nostdin', '-v', 'error', '-f', 'lavfi', '-i', 'testsrc2=size=64x48:rate=50']
const refusedAs = (code: string) => expect.objectContaining({ name: 'MediaError', code })

describe('a decoder', () => {
  it('that never ends is ended by its time limit', async () => {
    await expect(runProcess('ffmpeg', [...endless, '-f', 'null', '-'], { timeoutSeconds: 1 })).rejects.toThrow(refusedAs('ffmpeg-timeout'))
  })

  it('that burns processor time is ended by its limit of that', async () => {
    await expect(runProcess('ffmpeg', [...endless, '-f', 'null', '-'], { limits: { memoryBytes: 2 ** 31, cpuSeconds: 1 } })).rejects.toThrow(/1 s of processor time/)
  })

  it('that asks for more memory than its picture can need does not get it: it fails, or hangs until its time limit', async () => {
    await expect(runProcess('ffmpeg', ['-nostdin', '-v', 'error', '-threads', '1', '-filter_threads', '1', '-f', 'lavfi', '-i', 'testsrc2=size=8000x4000:rate=50:duration=1', '-f', 'null', '-'], { timeoutSeconds: 10, limits: { memoryBytes: 2 ** 26 } })).rejects.toThrow(expect.objectContaining({ code: expect.stringMatching(/^ffmpeg-(memory|timeout)$/) }))
  })

  it('that gives no picture is ended when it has been waited for too long', async () => {
    const fifo = clips.path('silent.ts')
    execFileSync('mkfifo', [fifo])
    const holder = spawn('sleep', ['30'], { stdio: [openSync(fifo, 'r+'), 'ignore', 'ignore'] })
    try {
      await expect(runProcess('ffmpeg', ['-nostdin', '-v', 'error', '-f', 'mpegts', '-i', fifo, '-f', 'rawvideo', 'pipe:1'], { idleSeconds: 1, onPixels: pipe => pipe.read(() => new Uint8Array(8), () => true) })).rejects.toThrow(/no picture for 1 s/)
    } finally {
      holder.kill()
    }
  })

  it('is allowed memory by the size of the picture', () => {
    const size = (width: number, height: number, bitDepth: number) => decodeLimits({ container: 'mov', width, height, bitDepth }, 4).memoryBytes / 2 ** 20
    // Measured with ffmpeg 5.1 and 4 threads: H.264 1080p takes 339 MiB, H.265 2160p 4:2:2 of 10 bits 770 MiB.
    expect(size(1920, 1080, 8)).toBeGreaterThan(1.5 * 339)
    expect(size(3840, 2160, 10)).toBeGreaterThan(1.5 * 770)
    expect(size(1920, 1080, 8)).toBeLessThan(1024)
  })

  it('runs under prlimit, and without limits by itself', () => {
    expect(limitedCommand('ffmpeg', ['-x'], undefined)).toEqual(['ffmpeg', ['-x']])
    expect(limitedCommand('ffmpeg', ['-x'], { memoryBytes: 1000, cpuSeconds: 7 })).toEqual([expect.stringMatching(/prlimit$/), ['--data=1000', '--core=0', '--cpu=7:7', 'ffmpeg', '-x']])
  })
})

it('what is not a file is not probed', async () => {
  await expect(probeClip(clips.path('silent.ts'), { transfer: 'auto', range: 'auto' })).rejects.toThrow(refusedAs('not-video'))
})
