import { createHash } from 'node:crypto'
import { and, desc, eq, isNull } from 'drizzle-orm'
import type { Database, Transaction } from '../../server/db/client'
import { acquisitions, alignments, cutLists, frameSets, jobs, stageOutputs, uploads } from '../../server/db/schema'
import { LampsumError } from '../../shared/errors'
import type { FactsOf } from '../../shared/stageOutputs'
import { pipeline, pipelineStages, type PipelineStage } from '../../shared/states'

/** Raise a stage's number when its results change, and every acquisition's stage counts as stale. */
export const stageVersions: Record<PipelineStage, number> = { inspect: 2, meter: 2, record: 2, align: 2, cut: 2, sum: 2, check: 2 }

export type StageOutput = typeof stageOutputs.$inferSelect
export type AcquisitionRow = typeof acquisitions.$inferSelect
export type UploadRow = typeof uploads.$inferSelect
type JobRow = typeof jobs.$inferSelect

/** Everything that decides what an acquisition's stages have to do. */
export interface Situation {
  acquisition: AcquisitionRow
  clip: UploadRow | null
  record: UploadRow | null
  outputs: Partial<Record<PipelineStage, StageOutput>>
  latestJobs: Partial<Record<PipelineStage, JobRow>>
  /** The newest alignment that a person accepted, and the newest cut list that a person stored. */
  manualAlignment: typeof alignments.$inferSelect | null
  manualCutList: typeof cutLists.$inferSelect | null
  /** Frame sets that nothing newer has replaced. */
  frameSets: Pick<typeof frameSets.$inferSelect, 'id' | 'line' | 'review'>[]
}

export const keyOf = (value: unknown) => createHash('sha256').update(JSON.stringify(value)).digest('hex')

export async function loadSituation(database: Database | Transaction, acquisitionId: string, lock = false): Promise<Situation> {
  const query = database.select().from(acquisitions).where(eq(acquisitions.id, acquisitionId))
  const [acquisition] = await (lock ? query.for('update') : query)
  if (!acquisition) throw new LampsumError('not-found')
  const stored = await database.select().from(uploads).where(and(eq(uploads.acquisitionId, acquisitionId), eq(uploads.state, 'stored'))).orderBy(desc(uploads.storedAt), desc(uploads.id))
  const outputs = await database.select().from(stageOutputs).where(eq(stageOutputs.acquisitionId, acquisitionId))
  const jobRows = await database.select().from(jobs).where(eq(jobs.acquisitionId, acquisitionId)).orderBy(desc(jobs.createdAt), desc(jobs.id))
  const [alignment] = await database.select().from(alignments).where(and(eq(alignments.acquisitionId, acquisitionId), eq(alignments.method, 'manual'), eq(alignments.accepted, true))).orderBy(desc(alignments.version)).limit(1)
  const [cutList] = await database.select().from(cutLists).where(eq(cutLists.acquisitionId, acquisitionId)).orderBy(desc(cutLists.version)).limit(1)
  const sets = await database.select({ id: frameSets.id, line: frameSets.line, review: frameSets.review }).from(frameSets).where(and(eq(frameSets.acquisitionId, acquisitionId), isNull(frameSets.supersededAt)))
  const latest: Situation['latestJobs'] = {}
  for (const job of jobRows) if (job.stage !== 'verify') latest[job.stage] ??= job
  return {
    acquisition,
    clip: stored.find(upload => upload.kind === 'clip') ?? null,
    record: stored.find(upload => upload.kind === 'record') ?? null,
    outputs: Object.fromEntries(outputs.map(output => [output.stage, output])),
    latestJobs: latest,
    manualAlignment: alignment ?? null,
    manualCutList: cutList?.authorId ? cutList : null,
    frameSets: sets,
  }
}

/** The hash of all that a stage reads; null while something of it is missing. A stage's output counts only under its present key. */
export function inputsKey(situation: Situation, stage: PipelineStage): string | null {
  const { acquisition, clip, record, outputs, manualAlignment, manualCutList } = situation
  const upstream: string[] = []
  for (const each of pipeline[stage] as readonly PipelineStage[]) {
    if (!isCurrent(situation, each)) return null
    upstream.push(outputs[each]!.outputKey)
  }
  const own = {
    inspect: () => clip && [clip.id, clip.sha256, acquisition.transfer, acquisition.range],
    meter: () => [acquisition.lampPatch],
    record: () => record && [record.id, record.sha256, acquisition.channels, plannedFrequencies(acquisition)],
    align: () => [acquisition.frameExposureSeconds, manualAlignment?.version ?? null],
    cut: () => [acquisition.plan, acquisition.guardSeconds, manualCutList && manualCutList.alignmentVersion === (outputs.align!.facts as unknown as FactsOf<'align'>).version ? manualCutList.version : null],
    sum: () => [],
    check: () => [acquisition.millimetresPerPixel],
  }[stage]()
  return own && keyOf([stage, stageVersions[stage], upstream, own])
}

/** What the record stage takes from the plan: repetitions do not matter there. */
export const plannedFrequencies = ({ plan }: Pick<AcquisitionRow, 'plan'>): number[] => [...new Set(plan.map(line => line.frequencyHz))].sort((a, b) => a - b)

export function isCurrent(situation: Situation, stage: PipelineStage): boolean {
  const output = situation.outputs[stage]
  return output !== undefined && output.inputsKey === inputsKey(situation, stage)
}

/** What keeps a stage from running, in a sentence; null when nothing does. */
export function missingFor(situation: Situation, stage: PipelineStage): string | null {
  if (inputsKey(situation, stage)) return null
  for (const each of pipelineStages) {
    if (each === stage) break
    if (needs(stage, each) && !isCurrent(situation, each)) return missingFor(situation, each) ?? `The ${each} stage has not finished. Run it first, or look at the acquisition for why it stopped.`
  }
  if (needs(stage, 'inspect') && !situation.clip) return 'The clip is missing. Upload the clip of this acquisition, then process it.'
  if (needs(stage, 'record') && !situation.record) return 'The record is missing. Upload the DAQ record of this acquisition, then process it.'
  return 'Something this stage reads is missing. Run the stages before it first.'
}

function needs(stage: PipelineStage, other: PipelineStage): boolean {
  return stage === other || (pipeline[stage] as readonly PipelineStage[]).some(each => needs(each, other))
}
