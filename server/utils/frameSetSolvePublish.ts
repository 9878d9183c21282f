import { and, desc, eq } from 'drizzle-orm'
import type { CheckResult } from '#shared/checks'
import { LampsumError } from '#shared/errors'
import type { FrameSetReview } from '#shared/frameSetReview'
import type { Flag, Group } from '#shared/measurement'
import type { User } from '#shared/schemas/people'
import { rejectionFlag } from '../../jobs/imaging/rejections'
import { advanceWithin } from '../../jobs/queue/advance'
import { named, warningsOf } from '../../jobs/stages/solveReview'
import type { Database, Transaction } from '../db/client'
import { withRetry } from '../db/retry'
import { acquisitions, frameSetFiles, frameSets, jobs, stageOutputs } from '../db/schema'
import { publishAcquisitionEvent } from './acquisitions'
import { writeAudit } from './audit'

export interface SolvedSet {
  id: string
  acquisitionId: string
  line: number
  frequencyHz: number
  /** SHA-256 of the frameset.npz that it was solved from. */
  before: string
  groups: Group[]
  checks: CheckResult[]
  review: FrameSetReview
  files: { name: string, storeName: string, bytes: number, sha256: string, contentType: string, fileKey: string }[]
}

/** One transaction: from here on the set has its new solution, or, when anything changed meanwhile, nothing has happened. */
export function publishSolved(database: Database, user: User, solved: SolvedSet): Promise<void> {
  const review = { ...solved.review, flags: [...solved.review.rejections.filter(({ by, byId }) => byId === null && by === 'program').map(rejectionFlag), ...warningsOf(solved.checks, solved.groups)] }
  return withRetry(() => database.transaction(async (transaction) => {
    const [acquisition] = await transaction.select({ campaignId: acquisitions.campaignId }).from(acquisitions).where(eq(acquisitions.id, solved.acquisitionId)).for('update')
    await requireUnchanged(transaction, solved)
    await transaction.update(frameSets).set({ groups: solved.groups, checks: solved.checks, review }).where(eq(frameSets.id, solved.id))
    for (const { storeName: _, name, ...file } of solved.files) await transaction.update(frameSetFiles).set(file).where(and(eq(frameSetFiles.frameSetId, solved.id), eq(frameSetFiles.name, name)))
    await settleStage(transaction, solved, review.flags)
    await writeAudit(transaction, { userId: user.id, action: 'frame set solved again', subject: solved.id, details: { rejected: review.rejections.map(({ repetition }) => repetition) } })
    await advanceWithin(transaction, solved.acquisitionId)
    await publishAcquisitionEvent(transaction, solved.acquisitionId, acquisition!.campaignId)
  }))
}

async function requireUnchanged(transaction: Transaction, { id, acquisitionId, before }: SolvedSet): Promise<void> {
  const [set] = await transaction.select({ state: frameSets.state, supersededAt: frameSets.supersededAt }).from(frameSets).where(eq(frameSets.id, id)).for('update')
  if (!set) throw new LampsumError('not-found')
  const [file] = await transaction.select({ sha256: frameSetFiles.sha256 }).from(frameSetFiles).where(and(eq(frameSetFiles.frameSetId, id), eq(frameSetFiles.name, 'frameset.npz'))).for('update')
  const [running] = await transaction.select({ id: jobs.id }).from(jobs).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.stage, 'check'), eq(jobs.state, 'running')))
  if (set.state === 'released') throw new LampsumError('wrong-state', 'This set was released in the meantime and stays as it was signed.')
  if (set.supersededAt || file?.sha256 !== before || running) throw new LampsumError('changed-meanwhile', 'This set was made anew in the meantime. Reload, then decide again.')
}

/** The check stage's own output names the set's files and flags; a decision that was asked for settles its job. */
async function settleStage(transaction: Transaction, { acquisitionId, line, frequencyHz, files }: SolvedSet, flags: Flag[]): Promise<void> {
  const where = and(eq(stageOutputs.acquisitionId, acquisitionId), eq(stageOutputs.stage, 'check'))
  const [output] = await transaction.select().from(stageOutputs).where(where).for('update')
  if (!output) return
  const others = output.flags.filter(flag => !flag.message.startsWith(`Line ${line} (`))
  const all = [...others, ...flags.map(flag => ({ ...named(flag, line, frequencyHz), stage: 'check' }))]
  const changes: Partial<typeof stageOutputs.$inferInsert> = { flags: all, files: { ...output.files, ...Object.fromEntries(files.map(({ storeName, fileKey }) => [storeName, fileKey])) } }
  const [job] = await transaction.select({ id: jobs.id, state: jobs.state, inputsKey: jobs.inputsKey }).from(jobs).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.stage, 'check'))).orderBy(desc(jobs.createdAt), desc(jobs.id)).limit(1)
  if (job?.state === 'needs review' && job.inputsKey && !all.some(flag => flag.severity === 'problem')) {
    await transaction.update(jobs).set({ state: 'done', message: 'Settled by hand on the frame sets.' }).where(and(eq(jobs.id, job.id), eq(jobs.state, 'needs review')))
    changes.inputsKey = job.inputsKey
  }
  await transaction.update(stageOutputs).set(changes).where(where)
}
