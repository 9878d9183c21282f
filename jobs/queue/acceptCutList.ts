import { and, desc, eq } from 'drizzle-orm'
import type { Database } from '../../server/db/client'
import { withRetry } from '../../server/db/retry'
import { acquisitions, cutLists, jobs } from '../../server/db/schema'
import { LampsumError } from '../../shared/errors'
import type { Group } from '../../shared/measurement'
import type { FactsOf } from '../../shared/stageOutputs'
import { advanceWithin } from './advance'
import { isCurrent, loadSituation } from './inputs'

/** Stores a person's cut list as a new version; it holds as long as the alignment it was made on. Answers the version. */
export function acceptCutList(database: Database, acquisitionId: string, groups: Group[], userId: string): Promise<number> {
  return withRetry(() => database.transaction(async (transaction) => {
    const situation = await loadSituation(transaction, acquisitionId, true)
    if (!isCurrent(situation, 'align')) throw new LampsumError('not-ready', 'There is no accepted alignment yet. Accept one, then edit the cut list.')
    requireFrames(groups, (situation.outputs.meter!.facts as unknown as FactsOf<'meter'>).frameCount)
    const [newest] = await transaction.select({ version: cutLists.version }).from(cutLists).where(eq(cutLists.acquisitionId, acquisitionId)).orderBy(desc(cutLists.version)).limit(1)
    const version = (newest?.version ?? 0) + 1
    const alignmentVersion = (situation.outputs.align!.facts as unknown as FactsOf<'align'>).version
    await transaction.insert(cutLists).values({ acquisitionId, version, alignmentVersion, groups, authorId: userId, createdAt: new Date() })
    await transaction.update(jobs).set({ state: 'done', message: `Settled by hand as version ${version}.` }).where(and(eq(jobs.acquisitionId, acquisitionId), eq(jobs.stage, 'cut'), eq(jobs.state, 'needs review')))
    await transaction.update(acquisitions).set({ runRequestedAt: new Date() }).where(eq(acquisitions.id, acquisitionId))
    await advanceWithin(transaction, acquisitionId)
    return version
  }))
}

function requireFrames(groups: Group[], frameCount: number): void {
  const fields: Record<string, string> = {}
  groups.forEach((group, index) => {
    if (group.firstFrame + group.frameCount > frameCount) fields[`groups.${index}.frameCount`] = `Group ${group.id} ends after the last frame. The clip has ${frameCount} frames, counted from 0.`
  })
  if (new Set(groups.map(group => group.id)).size !== groups.length) fields.groups = 'Two groups have the same id. Give each its own.'
  if (Object.keys(fields).length) throw new LampsumError('bad-input', undefined, { fields })
}
