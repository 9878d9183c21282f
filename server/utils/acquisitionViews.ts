import { and, asc, desc, eq, isNull } from 'drizzle-orm'
import { isCurrent, type Situation } from '../../jobs/queue/inputs'
import { LampsumError } from '#shared/errors'
import type { Flag } from '#shared/measurement'
import type { Acquisition, AlignmentOut, StageStatus } from '#shared/schemas/campaigns'
import type { CutList } from '#shared/schemas/results'
import type { FactsOf, SourceFile } from '#shared/stageOutputs'
import { pipelineStages, type PipelineStage } from '#shared/states'
import type { Database } from '../db/client'
import { acquisitions, alignments, cutLists, frameSets, users } from '../db/schema'
import { loadSituations, stateOf } from './acquisitionSituations'
import { selectAcquisitions, summaryOf } from './acquisitions'
import { countRepetitions } from './coverage'
import { listUploadsOf } from './uploads'

/** One acquisition with all that its page shows. */
export async function getAcquisition(database: Database, id: string): Promise<Acquisition> {
  const [row] = await selectAcquisitions(database).where(eq(acquisitions.id, id))
  if (!row) throw new LampsumError('not-found')
  const [situations, sets, alignment, uploads] = await Promise.all([
    loadSituations(database, [row.acquisition]), listSets(database, id), findAlignment(database, id), listUploadsOf(database, id),
  ])
  const situation = situations.get(id)!
  const { notes, cameraProfileId, frameExposureSeconds, transfer, range, millimetresPerPixel, plan, guardSeconds, autoRun, lampPatch, channels } = row.acquisition
  return {
    ...summaryOf(row, stateOf(situation, sets.length), sets.length),
    notes, cameraProfileId, frameExposureSeconds, transfer, range, millimetresPerPixel, plan, guardSeconds, autoRun, lampPatch, channels,
    flags: flagsOf(situation.situation), stages: pipelineStages.map(stage => stageStatus(situation.situation, stage)),
    uploads, alignment, frameSets: sets,
    clip: clipOf(situation.situation), record: recordOf(situation.situation),
  }
}

/** Flags of every output that stands, or that somebody still has to decide on. Once every frame is measured, the sum stage speaks for the alignment. */
function flagsOf(situation: Situation): Flag[] {
  const aligned = (situation.outputs.sum?.facts as FactsOf<'sum'> | undefined)?.refined && isCurrent(situation, 'sum')
  return pipelineStages.filter(stage => stage !== 'align' || !aligned).flatMap((stage) => {
    const output = situation.outputs[stage]
    if (!output || (output.inputsKey && !isCurrent(situation, stage))) return []
    return output.flags.map(flag => ({ ...flag, stage: flag.stage ?? stage }))
  })
}

function stageStatus(situation: Situation, stage: PipelineStage): StageStatus {
  const job = situation.latestJobs[stage]
  if (!job) return { stage, state: 'not yet', jobId: null, message: null, finishedAt: null }
  const finishedAt = job.finishedAt?.toISOString() ?? null
  if (job.state === 'done' && !isCurrent(situation, stage)) return { stage, state: 'not yet', jobId: job.id, message: 'What it reads has changed since it ran.', finishedAt }
  return { stage, state: job.state, jobId: job.id, message: job.message, finishedAt }
}

function clipOf({ outputs, clip }: Situation): Acquisition['clip'] {
  const facts = outputs.inspect?.facts as FactsOf<'inspect'> | undefined
  return facts && facts.source.uploadId === clip?.id ? { ...facts.clip, source: fileBehind(facts.source) } : null
}

function recordOf({ outputs, record }: Situation): Acquisition['record'] {
  const facts = outputs.record?.facts as FactsOf<'record'> | undefined
  return facts && facts.source.uploadId === record?.id ? { ...facts.record, darkLevel: facts.darkLevel, source: fileBehind(facts.source) } : null
}

/** Without its key in the store, which is nobody's business. */
const fileBehind = ({ uploadId, filename, bytes, sha256 }: SourceFile) => ({ uploadId, filename, bytes, sha256 })

async function listSets(database: Database, acquisitionId: string): Promise<Acquisition['frameSets']> {
  const rows = await database.select({ id: frameSets.id, line: frameSets.line, frequencyHz: frameSets.frequencyHz, state: frameSets.state, groups: frameSets.groups })
    .from(frameSets).where(and(eq(frameSets.acquisitionId, acquisitionId), isNull(frameSets.supersededAt))).orderBy(asc(frameSets.line), desc(frameSets.createdAt))
  return rows.map(({ groups, ...set }) => ({ ...set, ...countRepetitions(groups) }))
}

/** The newest alignment, accepted or not. */
export async function findAlignment(database: Database, acquisitionId: string): Promise<AlignmentOut | null> {
  const [row] = await database.select({ alignment: alignments, authorName: users.name }).from(alignments).leftJoin(users, eq(users.id, alignments.authorId))
    .where(eq(alignments.acquisitionId, acquisitionId)).orderBy(desc(alignments.version)).limit(1)
  if (!row) return null
  const { acquisitionId: _, authorId, createdAt, ...values } = row.alignment
  return { ...values, authorName: row.authorName, createdAt: createdAt.toISOString() }
}

export async function getAlignment(database: Database, acquisitionId: string): Promise<AlignmentOut> {
  const alignment = await findAlignment(database, acquisitionId)
  if (!alignment) throw new LampsumError('not-found', 'There is no alignment yet. It is made when clip and record have been read.')
  return alignment
}

export async function getCutList(database: Database, acquisitionId: string): Promise<CutList> {
  const [row] = await database.select({ cutList: cutLists, authorName: users.name }).from(cutLists).leftJoin(users, eq(users.id, cutLists.authorId))
    .where(eq(cutLists.acquisitionId, acquisitionId)).orderBy(desc(cutLists.version)).limit(1)
  if (!row) throw new LampsumError('not-found', 'There is no cut list yet. It is made when clip and record have been aligned.')
  const { version, alignmentVersion, groups, createdAt } = row.cutList
  return { version, alignmentVersion, groups, createdAt: createdAt.toISOString(), authorName: row.authorName }
}
