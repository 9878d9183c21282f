import { execFileSync } from 'node:child_process'
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll } from 'vitest'

/** A folder for a test file's clips, removed when its tests are done. */
export function clipFolder() {
  const folder = mkdtempSync(join(tmpdir(), 'lampsum-media-'))
  afterAll(() => rmSync(folder, { recursive: true, force: true }))
  const path = (name: string) => join(folder, name)
  return {
    path,
    /** Runs ffmpeg with its own test picture as input; the options go to the output. */
    make(name: string, options: string[], { size = '64x48', rate = '50', seconds = 1 } = {}): string {
      ffmpeg('-f', 'lavfi', '-i', `testsrc2=size=${size}:rate=${rate}:duration=${seconds}`, ...options, path(name))
      return path(name)
    },
    write(name: string, content: string | Uint8Array): string {
      writeFileSync(path(name), content)
      return path(name)
    },
  }
}

export const ffmpeg = (...args: string[]) => execFileSync('ffmpeg', ['-nostdin', '-hide_banner', '-v', 'error', '-y', ...args], { maxBuffer: 1 << 28 })
export const h264 = ['-c:v', 'libx264', '-preset', 'veryfast', '-pix_fmt', 'yuv420p']
