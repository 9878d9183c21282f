import { createHash } from 'node:crypto'
import { createWriteStream } from 'node:fs'
import { readFile, stat, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { Readable } from 'node:stream'
import { pipeline } from 'node:stream/promises'
import type { CheckResult } from '../../shared/checks'
import type { Group, GroupRole } from '../../shared/measurement'
import type { NpyArray } from '../formats/npy'
import { npzChunks, type LazyNpyArray } from '../formats/npz'
import type { FrameSetSolution } from '../imaging/solve'
import { ffmpegVersion } from '../media/version'
import type { Provenance } from './provenance'

export interface SetFile {
  name: string
  /** Its name among the files of the stage. */
  storeName: string
  path: string
  bytes: number
  sha256: string
  contentType: string
}

export interface FrameSetContent {
  line: number
  frequencyHz: number
  groups: Group[]
  sums: Uint32Array[]
  integrals: Float64Array
  solution: FrameSetSolution
  width: number
  height: number
  force: [number, number] | null
  checks: CheckResult[]
  provenance: Provenance
}

const roleCodes: Record<GroupRole, number> = { dark: 0, reference: 1, phase: 2 }

/** Writes `frameset.npz` and `manifest.json` of one line; the same content gives the same bytes. */
export async function writeFrameSet(folder: string, content: FrameSetContent): Promise<SetFile[]> {
  const npz = join(folder, `line-${content.line}-frameset.npz`)
  await pipeline(Readable.from(npzChunks(arraysOf(content)), { objectMode: true }), createWriteStream(npz))
  const set = await describeFile('frameset.npz', npz, content.line, 'application/zip')
  const { line, frequencyHz, groups, checks, provenance, force } = content
  const manifest = join(folder, `line-${line}-manifest.json`)
  await writeFile(manifest, `${JSON.stringify({
    format: 'lampsum-frame-set', formatVersion: 1, line, frequencyHz, ...provenance, decoder: await ffmpegVersion(),
    conventions: {
      sums: 'per pixel, sum over the group\'s frames of round(50000·E); E is linear light, 1 at nominal white',
      lampPhaseDeg: 'φ of the lamp signal L = mean·(1 + depth·sin(ωt + φ)), t from the record\'s first sample',
      integrals: 'A, C, S: sums over frames of the mean over the exposure of L, L·cos ωt, L·sin ωt, dark level subtracted, in record units',
      force: 'F of f(t) = Re{F exp(jωt)}, real and imaginary part, in record units',
    },
    force, groups, checks, files: [{ name: set.name, bytes: set.bytes, sha256: set.sha256 }],
  }, null, 2)}\n`)
  return [set, await describeFile('manifest.json', manifest, line, 'application/json')]
}

function arraysOf({ groups, sums, integrals, solution, width, height, frequencyHz, force }: FrameSetContent): Record<string, NpyArray | LazyNpyArray> {
  const count = groups.length
  const ints = (value: (group: Group) => number): NpyArray => ({ dtype: 'int32', shape: [count], data: Int32Array.from(groups, value) })
  const image = (data: Float32Array): NpyArray => ({ dtype: 'float32', shape: [height, width], data })
  return {
    sums: { dtype: 'uint32', shape: [count, height, width], chunks: () => sums.map(sum => new Uint8Array(sum.buffer, sum.byteOffset, sum.byteLength)) },
    frames: ints(group => group.frameCount),
    first_frame: ints(group => group.firstFrame),
    repetition: ints(group => group.repetition),
    role: ints(group => roleCodes[group.role]),
    lamp_phase_deg: { dtype: 'float64', shape: [count], data: Float64Array.from(groups, group => group.lampPhaseDeg ?? NaN) },
    accepted: { dtype: 'uint8', shape: [count], data: Uint8Array.from(groups, group => Number(group.accepted)) },
    integrals: { dtype: 'float64', shape: [count, 3], data: integrals },
    frequency_hz: { dtype: 'float64', shape: [], data: Float64Array.of(frequencyHz) },
    ...(force ? { force: { dtype: 'complex128' as const, shape: [], data: Float64Array.of(...force) } } : {}),
    scene: image(solution.scene),
    p: image(solution.p),
    q: image(solution.q),
    noise: image(solution.noise),
  }
}

async function describeFile(name: string, path: string, line: number, contentType: string): Promise<SetFile> {
  const sha256 = createHash('sha256').update(await readFile(path)).digest('hex')
  return { name, storeName: `line-${line}-${name}`, path, bytes: (await stat(path)).size, sha256, contentType }
}
