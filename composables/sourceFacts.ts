import type { ClipFacts } from '#shared/measurement'
import type { RecordFacts } from '#shared/records'
import type { Acquisition } from '#shared/schemas/campaigns'
import type { SourceFile } from '#shared/stageOutputs'

/** What inspect found, with the file behind it. */
export const clipOf = (acquisition: Acquisition | null) => (acquisition?.clip ?? null) as (ClipFacts & { source?: SourceFile }) | null
/** What record found, with the file behind it. */
export const recordOf = (acquisition: Acquisition | null) => (acquisition?.record ?? null) as (RecordFacts & { source?: SourceFile, darkLevel?: number | null }) | null

export const sourceWords = { stream: 'stated', setting: 'set', assumed: 'assumed' }

export function transferWord(transfer: ClipFacts['transfer']): string {
  return { bt709: 'BT.709', srgb: 'sRGB', linear: 'linear light', gamma22: 'gamma 2.2' }[transfer]
}
