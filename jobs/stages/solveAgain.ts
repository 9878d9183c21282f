import { open, readFile } from 'node:fs/promises'
import type { CheckResult } from '../../shared/checks'
import type { Group } from '../../shared/measurement'
import type { Rejection } from '../../shared/schemas/results'
import { openNpz, type ReadRange } from '../formats/npz'
import { inOrder, residualChecks } from '../imaging/checks'
import { gramOfSums } from '../imaging/repetitionResiduals'
import { writeFrameSet, type SetFile } from './frameSetWriter'
import type { SolvePool } from './solvePool'
import { sampleRows } from './solveSamples'
import type { SumSource } from './solveTasks'

export interface SolveAgainPayload {
  /** An empty folder for the new files. */
  folder: string
  /** The present files of the set. */
  npz: string
  manifest: string
  line: number
  frequencyHz: number
  /** With `accepted` as it is to be. */
  groups: Group[]
  /** Present checks; those that do not depend on the choice of repetitions are kept. */
  checks: CheckResult[]
  rejections: Rejection[]
}

export interface SolvedAgain {
  files: SetFile[]
  checks: CheckResult[]
}

/**
 * Solves a frame set again from its stored sums: nothing is decoded, and sums, integrals, alignment and every check that does not
 * depend on the choice stay as they are.
 *
 * @throws SolveError when nothing solvable is left
 */
export async function solveAgain({ folder, npz, manifest, line, frequencyHz, groups, checks, rejections }: SolveAgainPayload, pool: SolvePool): Promise<SolvedAgain> {
  const { forces, ...base } = JSON.parse(await readFile(manifest, 'utf8')) as { forces: ([number, number] | null)[] } & Record<string, unknown>
  const { sources, sumsCrc, integrals, width, height } = await readStored(npz)
  if (forces.length !== groups.length || sources.length !== groups.length) throw new Error(`${npz} does not hold the groups of its frame set`)
  const gram = gramOfSums(sources.map(source => sampleRows(source, width, height)))
  const fixed = checks.filter(({ checkId, repetition }) => repetition !== null && checkId !== 'residual')
  return writeFrameSet(folder, {
    line, frequencyHz, groups, sources, sumsCrc, integrals, width, height, forces, rejections,
    checks: inOrder(fixed, residualChecks(groups, integrals, gram)), manifest: { ...base, forces },
  }, pool)
}

interface StoredSums {
  sources: SumSource[]
  /** As the archive states it: sums that have changed since are found out. */
  sumsCrc: number
  integrals: Float64Array
  width: number
  height: number
}

async function readStored(path: string): Promise<StoredSums> {
  const file = await open(path, 'r')
  try {
    const read = async (offset: number, length: number) => {
      const { buffer, bytesRead } = await file.read(new Uint8Array(length), 0, length, offset)
      return buffer.subarray(0, bytesRead)
    }
    const reader = await openNpz((await file.stat()).size, read)
    const { shape, dataOffset } = await reader.locate('sums')
    const [count, height, width] = shape as [number, number, number]
    return {
      sources: Array.from({ length: count }, (_, g) => ({ path, offset: dataOffset + g * height * width * 4 })),
      sumsCrc: await storedCrc(read), integrals: (await reader.array('integrals')).data as Float64Array, width, height,
    }
  } finally {
    await file.close()
  }
}

/** Sums are the archive's first member (PKWARE APPNOTE 6.3, local file header: CRC-32 at offset 14). */
async function storedCrc(read: ReadRange): Promise<number> {
  const header = await read(0, 39)
  if (new TextDecoder().decode(header.subarray(30, 38)) !== 'sums.npy') throw new Error('The frame set does not begin with its sums')
  return new DataView(header.buffer, header.byteOffset).getUint32(14, true)
}
