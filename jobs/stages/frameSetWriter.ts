import { createHash } from 'node:crypto'
import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { CheckResult } from '../../shared/checks'
import type { Group, GroupRole } from '../../shared/measurement'
import type { Rejection } from '../../shared/schemas/results'
import type { NpyArray } from '../formats/npy'
import { inOrder, lineChecks } from '../imaging/checks'
import { medianOf } from '../imaging/median'
import { planSolution, type SolvePlan } from '../imaging/solve'
import { ffmpegVersion } from '../media/version'
import type { Provenance } from './provenance'
import { writeSetFile } from './solveFile'
import type { SolvePool } from './solvePool'
import { sampleRows } from './solveSamples'
import type { SolvedOffsets, SumSource } from './solveTasks'

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
  /** Sums of each group, and the checksum of them all (`crcOfMember`). */
  sources: SumSource[]
  sumsCrc: number
  integrals: Float64Array
  width: number
  height: number
  /** Complex amplitude of the force over each group's exposures; null where it was not measured. */
  forces: ([number, number] | null)[]
  /** Of the repetitions; those of the line come from the solution. */
  checks: CheckResult[]
  rejections: Rejection[]
  /** What the manifest says besides: see `manifestBase`, or the manifest of the set that is solved again. */
  manifest: Record<string, unknown>
}

export interface WrittenSet {
  files: SetFile[]
  /** With those of the line. */
  checks: CheckResult[]
}

const roleCodes: Record<GroupRole, number> = { dark: 0, reference: 1, phase: 2 }
/** Parts of a picture that are handed to threads; where they end changes no bit. */
const parts = 8

/**
 * Solves a line and writes its `frameset.npz` and `manifest.json`; the same content gives the same bytes.
 *
 * @throws SolveError before anything is written, when the accepted groups cannot be solved
 */
export async function writeFrameSet(folder: string, content: FrameSetContent, pool: SolvePool): Promise<WrittenSet> {
  const { line, groups, width, height, sources } = content
  const plan = planSolution({ roles: groups.map(group => group.role), integrals: content.integrals, frames: groups.map(group => group.frameCount), accepted: groups.map(group => group.accepted) })
  const force = forceOf(groups, content.forces)
  const path = join(folder, `line-${line}-frameset.npz`)
  let noiseAt = 0
  const written = await writeSetFile(path, { sums: { shape: [groups.length, height, width], sources, crc: content.sumsCrc }, small: smallArrays(content, force) }, (offsets) => {
    noiseAt = offsets.noise
    return solveBands(plan, sources, { width, height, path, offsets }, pool)
  })
  const checks = inOrder(content.checks, lineChecks(plan.conditionNumber, noiseShare(plan, groups, sources, { path, offset: noiseAt }, width, height)))
  const set: SetFile = { name: 'frameset.npz', storeName: `line-${line}-frameset.npz`, path, ...written, contentType: 'application/zip' }
  return { files: [set, await writeManifest(folder, content, force, checks, set)], checks }
}

/** The manifest's part that stays when the set is solved again. */
export async function manifestBase(line: number, frequencyHz: number, provenance: Provenance, forces: FrameSetContent['forces'], sumsSha256: string[]): Promise<Record<string, unknown>> {
  return {
    format: 'lampsum-frame-set', formatVersion: 1, line, frequencyHz, ...provenance, decoder: await ffmpegVersion(),
    conventions: {
      sums: 'per pixel, sum over the group\'s frames of round(50000·E); E is linear light, 1 at nominal white',
      lampPhaseDeg: 'φ of the lamp signal L = mean·(1 + depth·sin(ωt + φ)), t from the record\'s first sample',
      integrals: 'A, C, S: sums over frames of the mean over the exposure of L, L·cos ωt, L·sin ωt, dark level subtracted, in record units',
      force: 'F of f(t) = Re{F exp(jωt)}, real and imaginary part, in record units; of the set: mean over the accepted lit groups, weighted by frames',
    },
    sumsSha256, forces,
  }
}

async function writeManifest(folder: string, { line, groups, rejections, manifest }: FrameSetContent, force: [number, number] | null, checks: CheckResult[], set: SetFile): Promise<SetFile> {
  const path = join(folder, `line-${line}-manifest.json`)
  const text = `${JSON.stringify({ ...manifest, force, groups, rejections: rejections.map(({ repetition, by, reason }) => ({ repetition, by, reason })), checks, files: [{ name: set.name, bytes: set.bytes, sha256: set.sha256 }] }, null, 2)}\n`
  await writeFile(path, text)
  return { name: 'manifest.json', storeName: `line-${line}-manifest.json`, path, bytes: Buffer.byteLength(text), sha256: createHash('sha256').update(text).digest('hex'), contentType: 'application/json' }
}

async function solveBands(plan: SolvePlan, sources: SumSource[], { width, height, path, offsets }: { width: number, height: number, path: string, offsets: SolvedOffsets }, pool: SolvePool): Promise<void> {
  const used = plan.used.map(g => sources[g]!)
  const step = Math.max(4096, Math.ceil(width * height / parts))
  const bands: Promise<null>[] = []
  for (let firstPixel = 0; firstPixel < width * height; firstPixel += step) bands.push(pool.run({ kind: 'band', plan, sources: used, firstPixel, pixels: Math.min(step, width * height - firstPixel), target: { path, offsets } }))
  await Promise.all(bands)
}

/** Median noise of a sum over the median sum; null when the groups leave no freedom to see it. */
function noiseShare(plan: SolvePlan, groups: Group[], sources: SumSource[], noise: SumSource, width: number, height: number): number | null {
  const lit = groups.findIndex(group => group.role !== 'dark' && group.frameCount > 0)
  const level = medianOf(sampleRows(sources[lit]!, width, height))
  if (!plan.litFreedom || !(level > 0)) return null
  return medianOf(new Float32Array(sampleRows(noise, width, height).buffer)) / level
}

/** Mean over the accepted lit groups, weighted by their frames; null when the force was not recorded. */
function forceOf(groups: readonly Group[], forces: FrameSetContent['forces']): [number, number] | null {
  if (forces.every(force => force === null)) return null
  const total = [0, 0, 0]
  groups.forEach(({ accepted, role, frameCount }, g) => {
    const force = forces[g]
    if (!accepted || role === 'dark' || !force) return
    total[0]! += force[0] * frameCount
    total[1]! += force[1] * frameCount
    total[2]! += frameCount
  })
  return total[2] ? [total[0]! / total[2], total[1]! / total[2]] : null
}

function smallArrays({ groups, integrals, frequencyHz, forces }: FrameSetContent, force: [number, number] | null): Record<string, NpyArray> {
  const count = groups.length
  const ints = (value: (group: Group) => number): NpyArray => ({ dtype: 'int32', shape: [count], data: Int32Array.from(groups, value) })
  return {
    frames: ints(group => group.frameCount),
    first_frame: ints(group => group.firstFrame),
    repetition: ints(group => group.repetition),
    role: ints(group => roleCodes[group.role]),
    lamp_phase_deg: { dtype: 'float64', shape: [count], data: Float64Array.from(groups, group => group.lampPhaseDeg ?? NaN) },
    accepted: { dtype: 'uint8', shape: [count], data: Uint8Array.from(groups, group => Number(group.accepted)) },
    integrals: { dtype: 'float64', shape: [count, 3], data: integrals },
    frequency_hz: { dtype: 'float64', shape: [], data: Float64Array.of(frequencyHz) },
    ...(forces.some(each => each !== null) ? { force: { dtype: 'complex128' as const, shape: [], data: Float64Array.of(...force ?? [NaN, NaN]) } } : {}),
  }
}
