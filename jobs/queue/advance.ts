import { and, eq, inArray } from 'drizzle-orm'
import type { Database, Transaction } from '../../server/db/client'
import { withRetry } from '../../server/db/retry'
import { acquisitions, alignments, cutLists, stageOutputs } from '../../server/db/schema'
import { LampsumError } from '../../shared/errors'
import { activeJobStates, pipeline, pipelineStages, type PipelineStage } from '../../shared/states'
import { inputsKey, isCurrent, loadSituation, missingFor, type Situation } from './inputs'
import { publishJob } from './mariadbQueue'

/**
 * Queues every stage whose inputs are there and whose output is missing or stale. A stage that already ended badly
 * on the same inputs is left to a person. May be called at any time by anybody: it never queues twice.
 */
export function advanceAcquisition(database: Database, acquisitionId: string): Promise<void> {
  return withRetry(() => database.transaction(transaction => advanceWithin(transaction, acquisitionId)))
}

export async function advanceWithin(transaction: Transaction, acquisitionId: string): Promise<void> {
  const situation = await loadSituation(transaction, acquisitionId, true)
  if (!situation.acquisition.autoRun && !situation.acquisition.runRequestedAt) return
  for (const stage of pipelineStages) {
    const key = inputsKey(situation, stage)
    if (!key || isCurrent(situation, stage) || isActive(situation, stage) || endedBadly(situation, stage, key)) continue
    await publishJob(transaction, { stage, acquisitionId, inputsKey: key })
  }
}

const isActive = (situation: Situation, stage: PipelineStage) => (activeJobStates as readonly string[]).includes(situation.latestJobs[stage]?.state ?? '')

function endedBadly(situation: Situation, stage: PipelineStage, key: string): boolean {
  const job = situation.latestJobs[stage]
  return job !== undefined && job.inputsKey === key && ['failed', 'needs review', 'cancelled'].includes(job.state)
}

/** A person wants the stages run: from `from` on, or where they stopped. Answers the job that starts it. */
export function restartFrom(database: Database, acquisitionId: string, from: PipelineStage | null): Promise<{ jobId: string }> {
  return withRetry(() => database.transaction(async (transaction) => {
    const before = await loadSituation(transaction, acquisitionId, true)
    const stage = from ?? firstUnfinished(before)
    if (!stage) throw new LampsumError('not-ready', 'Everything is up to date. Name a stage to run it again from there.')
    const missing = missingFor(before, stage)
    if (missing) throw new LampsumError('not-ready', missing)
    await transaction.update(acquisitions).set({ runRequestedAt: new Date() }).where(eq(acquisitions.id, acquisitionId))
    if (from) await forget(transaction, acquisitionId, from)
    const situation = await loadSituation(transaction, acquisitionId)
    const active = situation.latestJobs[stage]
    if (active && isActive(situation, stage)) return { jobId: active.id }
    const jobId = await publishJob(transaction, { stage, acquisitionId, inputsKey: inputsKey(situation, stage)! })
    if (!jobId) throw new LampsumError('wrong-state')
    return { jobId }
  }))
}

function firstUnfinished(situation: Situation): PipelineStage | null {
  return pipelineStages.find(stage => !isCurrent(situation, stage) && inputsKey(situation, stage)) ?? pipelineStages.find(stage => !isCurrent(situation, stage)) ?? null
}

/** Drops the outputs from a stage on; what people had set by hand from there on gives way to a new proposal. */
async function forget(transaction: Transaction, acquisitionId: string, from: PipelineStage): Promise<void> {
  const later = pipelineStages.filter(stage => reaches(stage, from))
  await transaction.delete(stageOutputs).where(and(eq(stageOutputs.acquisitionId, acquisitionId), inArray(stageOutputs.stage, later)))
  if (later.includes('align')) await transaction.update(alignments).set({ accepted: false }).where(eq(alignments.acquisitionId, acquisitionId))
  if (later.includes('cut')) await transaction.update(cutLists).set({ alignmentVersion: 0 }).where(eq(cutLists.acquisitionId, acquisitionId))
}

function reaches(stage: PipelineStage, from: PipelineStage): boolean {
  return stage === from || (pipeline[stage] as readonly PipelineStage[]).some(each => reaches(each, from))
}
