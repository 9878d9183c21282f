import { readFile, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { desc, eq } from 'drizzle-orm'
import type { Transaction } from '../../server/db/client'
import { cutLists } from '../../server/db/schema'
import type { FrameLoss, Group, PlanLine } from '../../shared/measurement'
import type { FrameRange } from '../media/frameRanges'
import { cutFrames } from '../signal/cut'
import { exposureOf, factsOf, pathOf, readFloat64 } from './inputs'
import type { RecordRegimes } from './record'
import { defineStage, type StageResult } from './stage'

interface Payload {
  regimes: string
  frameTimes: string
  alignment: { version: number, offsetSeconds: number, driftPpm: number }
  losses: FrameLoss[]
  exposureSeconds: number
  guardSeconds: number
  plan: PlanLine[]
  /** A person's cut list for this alignment is taken as it is. */
  manual: { version: number, groups: Group[] } | null
}

interface Result extends StageResult {
  groups: Group[]
}

/** Gives every frame that lies wholly inside one regime to its group. */
export const cut = defineStage<Payload, Result>({
  load(situation, store) {
    const alignment = factsOf(situation, 'align')
    const manual = situation.manualCutList
    return {
      regimes: pathOf(situation, store, 'record', 'regimes'),
      frameTimes: pathOf(situation, store, 'align', 'frame-times'),
      alignment: { version: alignment.version, offsetSeconds: alignment.offsetSeconds, driftPpm: alignment.driftPpm },
      losses: alignment.losses,
      exposureSeconds: exposureOf(situation),
      guardSeconds: situation.acquisition.guardSeconds,
      plan: situation.acquisition.plan,
      manual: manual && manual.alignmentVersion === alignment.version ? { version: manual.version, groups: manual.groups } : null,
    }
  },

  async run({ regimes: regimesPath, frameTimes, alignment, losses, exposureSeconds, guardSeconds, plan, manual }, { workDir }) {
    const { regimes } = JSON.parse(await readFile(regimesPath, 'utf8')) as RecordRegimes
    const { groups, flags } = manual
      ? { groups: manual.groups, flags: [] }
      : cutFrames({ regimes, alignment, frameTimesSeconds: await readFloat64(frameTimes), exposureSeconds, guardSeconds, plan, excluded: uncertainFrames(losses) })
    const lines = linesOf(groups)
    const complete = lines.some(line => line.complete)
    const file = join(workDir, 'groups.json')
    await writeFile(file, JSON.stringify(groups))
    return {
      state: complete ? 'done' : 'needs review',
      message: complete
        ? `${groups.length} groups in ${lines.length} ${lines.length === 1 ? 'line' : 'lines'}: ${lines.map(line => `${Number(line.frequencyHz.toFixed(2))} Hz`).join(', ')}.`
        : 'No line has a reference and two phase groups. Check that the record’s illumination column is the right one and that the alignment fits.',
      facts: { version: manual?.version ?? 0, manual: manual !== null, alignmentVersion: alignment.version, lines: lines.map(({ line, frequencyHz, groups: count }) => ({ line, frequencyHz, groups: count })) },
      files: { groups: file },
      flags: flags.map(flag => ({ ...flag, stage: 'cut' })),
      groups,
    }
  },

  async publish(transaction, { situation, payload, result }) {
    if (!payload.manual) result.facts.version = await publishCutList(transaction, situation.acquisition.id, payload.alignment.version, result.groups)
  },
})

/** Stores a cut list that the program made as a new version. Answers the version. */
export async function publishCutList(transaction: Transaction, acquisitionId: string, alignmentVersion: number, groups: Group[]): Promise<number> {
  const [newest] = await transaction.select({ version: cutLists.version }).from(cutLists).where(eq(cutLists.acquisitionId, acquisitionId)).orderBy(desc(cutLists.version)).limit(1).for('update')
  const version = (newest?.version ?? 0) + 1
  await transaction.insert(cutLists).values({ acquisitionId, version, alignmentVersion, groups, authorId: null, createdAt: new Date() })
  return version
}

/** Frames whose time is not known, because frames were lost somewhere among them. */
export function uncertainFrames(losses: readonly FrameLoss[]): FrameRange[] {
  return losses.filter(loss => loss.uncertainFrames > 0).map(({ frame, uncertainFrames }) => ({ firstFrame: frame - uncertainFrames, frameCount: uncertainFrames }))
}

/** A line can be solved when it has a reference and at least two phase groups. */
export function linesOf(groups: Group[]): { line: number, frequencyHz: number, groups: number, complete: boolean }[] {
  const lines = new Map<number, Group[]>()
  for (const group of groups) lines.set(group.line, [...lines.get(group.line) ?? [], group])
  return [...lines].sort(([a], [b]) => a - b).map(([line, members]) => ({
    line,
    frequencyHz: members.find(group => group.role === 'phase')?.frequencyHz ?? members[0]!.frequencyHz,
    groups: members.length,
    complete: members.some(group => group.role === 'reference') && members.filter(group => group.role === 'phase').length >= 2,
  }))
}
