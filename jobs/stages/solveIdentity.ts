import { createHash } from 'node:crypto'
import type { Group } from '../../shared/measurement'
import type { MeterColumns } from '../imaging/lightChecks'
import type { Provenance } from './provenance'

export interface LineInputs {
  line: number
  frequencyHz: number
  groups: readonly Group[]
  integrals: Float64Array
  forces: readonly ([number, number] | null)[]
  meter: MeterColumns
  /** Of each group's sums. */
  sumsSha256: readonly string[]
  provenance: Provenance
}

/**
 * What a line's frame set is made of, as hashes. Versions of cut list and alignment and the plan are left out: they change
 * when another line is edited, and whatever they change in this one shows in its groups, integrals and sums.
 */
export function marksOf({ line, frequencyHz, groups, integrals, forces, meter, sumsSha256, provenance }: LineInputs): { identity: string, repetitionKeys: Record<string, string> } {
  const { program, inputs, clip, record, settings: { plan: _plan, ...settings }, alignment: { offsetSeconds, driftPpm } } = provenance
  const frames = groups.map(group => frameColumns(meter, group))
  const repetitions = [...new Set(groups.filter(group => group.role !== 'dark').map(group => group.repetition))]
  return {
    identity: hashOf([line, frequencyHz, groups, [...integrals].map(String), forces, frames, sumsSha256, program, inputs, clip, record, settings, offsetSeconds, driftPpm]),
    repetitionKeys: Object.fromEntries(repetitions.map(repetition => [repetition, hashOf(groups.flatMap(({ repetition: own, role, lampPhaseDeg }, g) => own === repetition && role !== 'dark' ? [[role, lampPhaseDeg, sumsSha256[g]]] : []))])),
  }
}

/** The meter's values of the group's frames. */
function frameColumns({ light, clipped, black }: MeterColumns, { firstFrame, frameCount }: Group): number[][] {
  return [light, clipped, black].map(column => Array.from({ length: frameCount }, (_, i) => column[firstFrame + i]!))
}

const hashOf = (value: unknown) => createHash('sha256').update(JSON.stringify(value)).digest('hex')
