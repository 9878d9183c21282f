import { mkdtempSync, mkdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { bundleRunner } from '../../scripts/lib/build'
import type { Group } from '../../shared/measurement'
import { crcOfMember, digestOf, type SumDigest } from '../../jobs/stages/sumDigest'
import { writeFrameSet, type FrameSetContent, type WrittenSet } from '../../jobs/stages/frameSetWriter'
import type { SolvePool } from '../../jobs/stages/solvePool'
import { normal, random, WaveTexture } from '../unit/imaging/pictures'

/** A folder of its own with the solver's bundle in it; `remove` takes it away. */
export async function solverFolder(): Promise<{ root: string, entry: string, remove: () => void }> {
  const root = mkdtempSync(join(tmpdir(), 'lampsum-solver-'))
  await bundleRunner(join(root, 'runner'))
  return { root, entry: join(root, 'runner', 'solveWorker.mjs'), remove: () => rmSync(root, { recursive: true, force: true }) }
}

export interface StoredLine {
  groups: Group[]
  digests: SumDigest[]
  content: Omit<FrameSetContent, 'groups'>
}

/** A line of repetitions (dark, reference, sine, cosine) whose sums lie in files, as the sum stage leaves them. */
export async function storedLine(folder: string, { repetitions = 3, width = 90, height = 71, seed = 5, noise = 300 } = {}): Promise<StoredLine> {
  mkdirSync(folder, { recursive: true })
  const next = random(seed)
  const [scene, motion] = [new WaveTexture(seed), new WaveTexture(seed + 1)]
  const groups: Group[] = []
  const integrals: number[] = []
  const sources: FrameSetContent['sources'] = []
  for (let repetition = 1; repetition <= repetitions; repetition++) {
    for (const [kind, role] of (['dark', 'reference', 'phase', 'phase'] as const).entries()) {
      const g = groups.length
      const [a, c, s] = role === 'dark' ? [0.1, 0, 0] : [100 + repetition, kind === 3 ? 40 : 0.2, kind === 2 ? 40 : 0.1]
      groups.push({ id: `l1-r${repetition}-${kind}`, line: 1, frequencyHz: 400, repetition, role, lampPhaseDeg: role === 'phase' ? (kind - 2) * 90 : null, depth: role === 'phase' ? 0.8 : null, distortion: null, firstFrame: g * 50, frameCount: 50, accepted: true, flags: [] } as Group)
      integrals.push(a, c, s)
      const path = join(folder, `sum-${g}`)
      writeFileSync(path, new Uint8Array(Uint32Array.from({ length: width * height }, (_, i) => {
        const [x, y] = [i % width, Math.floor(i / width)]
        return Math.max(0, Math.round(a * 9000 * scene.at(x, y) + (c - s) * 300 * (motion.at(x, y) - 1) + 50 * 40 + noise * normal(next)))
      }).buffer))
      sources.push({ path, offset: 0 })
    }
  }
  const digests = sources.map(source => digestOf(readFileSync(source.path)))
  const forces = groups.map((group, g): [number, number] | null => group.role === 'dark' ? null : [3 + g, -1])
  return { groups, digests, content: { line: 1, frequencyHz: 400, sources, sumsCrc: crcOfMember(digests, height, width), integrals: Float64Array.from(integrals), width, height, forces, checks: [], rejections: [], manifest: { format: 'lampsum-frame-set', sumsSha256: digests.map(({ sha256 }) => sha256), forces } } }
}

export function writeStored(folder: string, { groups, content }: StoredLine, pool: SolvePool): Promise<WrittenSet> {
  mkdirSync(folder, { recursive: true })
  return writeFrameSet(folder, { ...content, groups }, pool)
}
