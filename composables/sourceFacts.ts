import type { ClipFacts } from '#shared/measurement'
import type { RecordFacts } from '#shared/records'
import type { SourceFile } from '#shared/stageOutputs'

interface WithSource<F> { facts: F, source: SourceFile | null }

/** What inspect found, and the file behind it (StageFacts.inspect). */
export const clipOf = (clip: Record<string, unknown> | null): WithSource<ClipFacts> | null => split<ClipFacts>(clip, 'clip')
/** What record found, and the file behind it (StageFacts.record). */
export const recordOf = (record: Record<string, unknown> | null): WithSource<RecordFacts> | null => split<RecordFacts>(record, 'record')

function split<F>(value: Record<string, unknown> | null, name: string): WithSource<F> | null {
  if (!value) return null
  return { facts: (value[name] ?? value) as F, source: (value.source as SourceFile | undefined) ?? null }
}

export const sourceWords = { stream: 'stated', setting: 'set', assumed: 'assumed' }

export function transferWord(transfer: ClipFacts['transfer']): string {
  return { bt709: 'BT.709', srgb: 'sRGB', linear: 'linear light', gamma22: 'gamma 2.2' }[transfer]
}
