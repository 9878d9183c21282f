import { randomUUID } from 'node:crypto'
import { mkdir, readdir, rm, stat } from 'node:fs/promises'
import { join } from 'node:path'
import { and, eq } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { FrameSetReview } from '#shared/frameSetReview'
import type { Group } from '#shared/measurement'
import type { User } from '#shared/schemas/people'
import type { FrameSet, Rejection } from '#shared/schemas/results'
import { withRejections } from '../../jobs/imaging/review'
import type { Database } from '../db/client'
import { frameSetFiles, frameSets, jobs } from '../db/schema'
import type { FileStore } from '../store/fileStore'
import { publishSolved, type SolvedSet } from './frameSetSolvePublish'
import { getFrameSet } from './frameSets'
import type { Solver } from './solver'

export interface SolveContext {
  database: Database
  store: FileStore
  solver: Solver
  /** Folder on the store's file system for files that are being made. */
  solving: string
}

const abandonedMilliseconds = 60 * 60_000

/**
 * Solves a draft again from its stored sums with other repetitions left out. The set keeps its id; its files are replaced
 * by one transaction once the new ones are whole, and those who download the old ones meanwhile are not disturbed.
 *
 * @param reject what is left out from now on; undefined leaves the choice as it is
 */
export async function solveFrameSetAgain({ database, store, solver, solving }: SolveContext, user: User, id: string, reject?: number[], now = new Date()): Promise<FrameSet> {
  const { set, review, files } = await findDraft(database, id)
  const rejected = chosen(set.groups, review, reject)
  const decided = decide(review, rejected, user, now)
  const groups = withRejections(set.groups.map((group, g) => ({ ...group, accepted: review.usable[g] ?? group.accepted })), rejected)
  const folder = join(solving, randomUUID())
  await sweep(solving, now)
  await mkdir(folder, { recursive: true })
  const made: string[] = []
  try {
    const solved = await solver.solve({
      folder, npz: store.localPath(files['frameset.npz']!.fileKey), manifest: store.localPath(files['manifest.json']!.fileKey),
      line: set.line, frequencyHz: set.frequencyHz, groups, checks: set.checks, rejections: decided.rejections,
    })
    const stored: SolvedSet['files'] = []
    for (const { name, storeName, path, bytes, sha256, contentType } of solved.files) {
      const fileKey = `results/${set.acquisitionId}/check/solved-${randomUUID()}/${storeName}`
      made.push(fileKey)
      await store.put(fileKey, path)
      stored.push({ name, storeName, bytes, sha256, contentType, fileKey })
    }
    await publishSolved(database, user, { id, acquisitionId: set.acquisitionId, line: set.line, frequencyHz: set.frequencyHz, before: files['frameset.npz']!.sha256, groups, checks: solved.checks, review: decided, files: stored })
  } catch (error) {
    for (const key of made) await store.remove(key).catch(() => {})
    if (!(error instanceof LampsumError) && await hasChanged(database, id, files['frameset.npz']!.sha256)) throw new LampsumError('changed-meanwhile', undefined, { cause: error })
    throw error
  } finally {
    await rm(folder, { recursive: true, force: true })
  }
  for (const { fileKey } of Object.values(files)) await store.remove(fileKey).catch(() => {})
  return getFrameSet(database, id)
}

async function findDraft(database: Database, id: string) {
  const [set] = await database.select().from(frameSets).where(eq(frameSets.id, id))
  if (!set) throw new LampsumError('not-found')
  if (set.state === 'released') throw new LampsumError('wrong-state', 'A released frame set stays as it was signed. Run the acquisition again to make a new one.')
  if (set.supersededAt) throw new LampsumError('wrong-state', 'A newer run has taken this set’s place. Open the newer one.')
  const [running] = await database.select({ id: jobs.id }).from(jobs).where(and(eq(jobs.acquisitionId, set.acquisitionId), eq(jobs.stage, 'check'), eq(jobs.state, 'running')))
  if (running) throw new LampsumError('wrong-state', 'The check stage is making this set anew right now. Wait until it has finished, then decide.')
  const rows = await database.select().from(frameSetFiles).where(eq(frameSetFiles.frameSetId, id))
  const files = Object.fromEntries(rows.filter(({ name }) => ['frameset.npz', 'manifest.json'].includes(name)).map(row => [row.name, row]))
  if (!set.review || !files['frameset.npz'] || !files['manifest.json']) throw new LampsumError('not-ready', 'This set was made before sets could be solved again. Process the acquisition from its check stage first.')
  return { set, review: set.review, files }
}

function chosen(groups: readonly Group[], review: FrameSetReview, reject: number[] | undefined): number[] {
  if (!reject) return review.rejections.map(({ repetition }) => repetition)
  const known = new Set(groups.filter(group => group.role !== 'dark').map(group => group.repetition))
  const unknown = reject.find(repetition => !known.has(repetition))
  if (unknown !== undefined) throw new LampsumError('bad-input', undefined, { fields: { reject: `There is no repetition ${unknown} in this set, only ${[...known].sort((a, b) => a - b).join(', ')}.` } })
  return [...new Set(reject)].sort((a, b) => a - b)
}

/** Rejections that were there keep their author; what a person takes back in stays in, whatever the checks say later. */
function decide(review: FrameSetReview, rejected: number[], user: User, now: Date): FrameSetReview {
  const before = new Map(review.rejections.map(rejection => [rejection.repetition, rejection]))
  const rejections = rejected.map((repetition): Rejection => before.get(repetition) ?? { repetition, by: user.name, byId: user.id, reason: `Rejected by ${user.name}.` })
  const takenBack = [...before.keys()].filter(repetition => !rejected.includes(repetition))
  return {
    ...review, rejections,
    acceptedByPerson: [...new Set([...review.acceptedByPerson, ...takenBack])].filter(repetition => !rejected.includes(repetition)).sort((a, b) => a - b),
    history: [...review.history, { at: now.toISOString(), byName: user.name, byId: user.id, rejected }],
  }
}

/** The files may have been taken away under our hands by somebody who was faster. */
async function hasChanged(database: Database, id: string, sha256: string): Promise<boolean> {
  const [file] = await database.select({ sha256: frameSetFiles.sha256 }).from(frameSetFiles).where(and(eq(frameSetFiles.frameSetId, id), eq(frameSetFiles.name, 'frameset.npz')))
  return file?.sha256 !== sha256
}

/** Folders of a server that was killed while it solved. */
async function sweep(solving: string, now: Date): Promise<void> {
  for (const entry of await readdir(solving).catch(() => [])) {
    const path = join(solving, entry)
    const facts = await stat(path).catch(() => null)
    if (facts && now.getTime() - facts.mtimeMs > abandonedMilliseconds) await rm(path, { recursive: true, force: true })
  }
}
