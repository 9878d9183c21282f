import { randomUUID } from 'node:crypto'
import { readFile } from 'node:fs/promises'
import { and, eq, isNull, notInArray } from 'drizzle-orm'
import PQueue from 'p-queue'
import { frameSetFiles, frameSets } from '../../server/db/schema'
import type { CheckResult } from '../../shared/checks'
import type { FrameSetReview } from '../../shared/frameSetReview'
import type { ClipFacts, Flag, Group } from '../../shared/measurement'
import { readNpz } from '../formats/npz'
import { repetitionMotion } from '../imaging/cameraMotion'
import { repetitionChecks } from '../imaging/checks'
import type { MeterColumns } from '../imaging/lightChecks'
import { gramOfSums } from '../imaging/repetitionResiduals'
import { reviewRepetitions } from '../imaging/review'
import { SolveError } from '../imaging/solve'
import type { Situation } from '../queue/inputs'
import { exposureIntegrals } from '../signal/exposureIntegrals'
import { createLightIntegrals, type FrameTiming, type LightIntegrals } from '../signal/lightPrediction'
import { cutListOf } from './cutList'
import { linesOf } from './cut'
import { manifestBase, writeFrameSet, type SetFile } from './frameSetWriter'
import { exposureOf, factsOf, pathOf, readFloat32, readFloat64 } from './inputs'
import { provenanceOf, type Provenance } from './provenance'
import { knownShifts } from './knownShifts'
import { crcOfMember, type SumDigest } from './sumDigest'
import { forceOver } from './solveForce'
import { marksOf } from './solveIdentity'
import { createSolvePool, type SolvePool } from './solvePool'
import { decisionsThatHold, named, usableGroups, warningsOf } from './solveReview'
import { sampleRows } from './solveSamples'
import type { SumSource } from './solveTasks'
import { defineStage, type StageHelpers, type StageResult } from './stage'
import { sumFileName } from './sum'

interface Payload {
  clip: ClipFacts
  groups: Group[]
  cutListVersion: number
  sums: Record<string, string>
  digests: Record<string, SumDigest>
  meter: string
  frameTimes: string
  illumination: string
  force: string | null
  sampleRateHz: number
  darkLevel: number | null
  alignment: { offsetSeconds: number, driftPpm: number }
  exposureSeconds: number
  provenance: Provenance
  /** What an earlier run and people have left. */
  prior: Situation['frameSets']
}

/** A set that was made or, with `keep`, one that is there already and stays as it is. */
interface LineResult {
  line: number
  flags: Flag[]
  keep?: string
  set?: CheckedSet
}

interface CheckedSet {
  frequencyHz: number
  groups: Group[]
  checks: CheckResult[]
  files: SetFile[]
  review: FrameSetReview
}

interface Result extends StageResult {
  lines: LineResult[]
}

const linesAtOnce = 2

/** Checks every repetition, leaves bumped ones out, solves each line and writes its frame set. */
export const check = defineStage<Payload, Result>({
  async load(situation, store) {
    const groups = await cutListOf(situation, store)
    const { record, darkLevel } = factsOf(situation, 'record')
    const { alignment, cutListVersion, spans } = factsOf(situation, 'sum')
    const used = groups.filter(group => group.frameCount > 0)
    return {
      clip: factsOf(situation, 'inspect').clip,
      groups: used,
      cutListVersion,
      sums: Object.fromEntries(used.map(group => [group.id, pathOf(situation, store, 'sum', sumFileName(group.id))])),
      digests: Object.fromEntries(spans.map(({ id, sha256, crc }) => [id, { sha256, crc }])),
      meter: pathOf(situation, store, 'meter', 'light'),
      frameTimes: pathOf(situation, store, 'sum', 'frame-times'),
      illumination: pathOf(situation, store, 'record', 'illumination'),
      force: record.channels.some(channel => channel.role === 'force') ? pathOf(situation, store, 'record', 'force') : null,
      sampleRateHz: record.sampleRateHz,
      darkLevel,
      alignment: { offsetSeconds: alignment.offsetSeconds, driftPpm: alignment.driftPpm },
      exposureSeconds: exposureOf(situation),
      provenance: provenanceOf(situation),
      prior: situation.frameSets,
    }
  },

  async run(payload, helpers) {
    const lines = linesOf(payload.groups).filter(line => line.complete)
    const integrals = createLightIntegrals(await readFloat32(payload.illumination), payload.sampleRateHz, payload.darkLevel ?? 0)
    const timing: FrameTiming = { ...payload.alignment, exposureSeconds: payload.exposureSeconds, frameTimesSeconds: await readFloat64(payload.frameTimes) }
    const pool = createSolvePool()
    const results: LineResult[] = []
    let finished = 0
    try {
      // Two at a time: while one line waits for its pictures the other reads and writes.
      const queue = new PQueue({ concurrency: linesAtOnce })
      results.push(...await Promise.all(lines.map(({ line, frequencyHz }) => queue.add(async () => {
        helpers.signal.throwIfAborted()
        const result = await checkOne(payload, integrals, timing, line, frequencyHz, pool, helpers)
        helpers.progress({ progress: ++finished / lines.length })
        return result
      }))))
    } finally {
      await pool.close()
    }
    return resultOf(results)
  },

  async publish(transaction, { situation, payload, result, keys }) {
    const { id } = situation.acquisition
    const kept = result.lines.flatMap(({ keep }) => keep ?? [])
    const now = new Date()
    await transaction.update(frameSets).set({ supersededAt: now }).where(and(eq(frameSets.acquisitionId, id), isNull(frameSets.supersededAt), kept.length ? notInArray(frameSets.id, kept) : undefined))
    const ids: string[] = []
    for (const { line, keep, set } of result.lines) {
      const frameSetId = keep ?? randomUUID()
      if (keep || set) ids.push(frameSetId)
      if (!set) continue
      await transaction.insert(frameSets).values({
        id: frameSetId, acquisitionId: id, line, frequencyHz: set.frequencyHz, state: 'draft', cutListVersion: payload.cutListVersion, checks: set.checks, groups: set.groups, review: set.review,
        width: payload.clip.width, height: payload.clip.height, createdAt: now,
      })
      await transaction.insert(frameSetFiles).values(set.files.map(({ name, bytes, sha256, contentType, storeName }) => ({ frameSetId, name, bytes, sha256, contentType, fileKey: keys[storeName]! })))
    }
    result.facts.frameSetIds = ids
  },
})

function resultOf(lines: LineResult[]): Result {
  const flags = lines.flatMap(line => line.flags)
  const sets = lines.filter(line => line.keep || line.set)
  const kept = lines.filter(line => line.keep).length
  const ready = `${sets.length} frame ${sets.length === 1 ? 'set' : 'sets'} ready${kept ? `, ${kept} of them unchanged` : ''}`
  return {
    state: flags.some(flag => flag.severity === 'problem') ? 'needs review' : 'done',
    message: flags.find(flag => flag.severity === 'problem')?.message ?? `${ready}${flags.length ? `. ${flags[0]!.message}` : '.'}`,
    facts: { frameSetIds: [] }, flags: flags.map(flag => ({ ...flag, stage: 'check' })), lines,
    files: Object.fromEntries(lines.flatMap(({ set }) => set ? set.files.map(file => [file.storeName, file.path]) : [])),
  }
}

async function checkOne(payload: Payload, light: LightIntegrals, timing: FrameTiming, line: number, frequencyHz: number, pool: SolvePool, helpers: StageHelpers): Promise<LineResult> {
  const { width, height } = payload.clip
  const groups = payload.groups.filter(group => group.line === line)
  const sources = groups.map((group): SumSource => ({ path: payload.sums[group.id]!, offset: 0 }))
  const integrals = Float64Array.from(groups.flatMap(({ firstFrame, frameCount }) => {
    const { A, C, S } = exposureIntegrals(light, timing, { frequencyHz, firstFrame, frameCount })
    return [A, C, S]
  }))
  const forces = await Promise.all(groups.map(group => payload.force && group.role !== 'dark' ? forceOver(payload.force, payload.sampleRateHz, timing, frequencyHz, group) : null))
  const meter = meterColumns(await readFile(payload.meter))
  const digests = groups.map(group => payload.digests[group.id]!)
  const sumsSha256 = digests.map(({ sha256 }) => sha256)
  const marks = marksOf({ line, frequencyHz, groups, integrals, forces, meter, sumsSha256, provenance: payload.provenance })
  const prior = payload.prior.find(set => set.line === line) ?? null
  if (prior?.review?.identity === marks.identity) return { line, keep: prior.id, flags: prior.review.flags.map(flag => named(flag, line, frequencyHz)) }
  const before = decisionsThatHold(prior?.review ?? null, groups, marks.repetitionKeys)
  try {
    const shifts = knownShifts(prior?.review?.shifts ?? [], sumsSha256, (a, b) => pool.run({ kind: 'shift', a: sources[a]!, b: sources[b]!, width, height }))
    const motion = await repetitionMotion(groups, shifts.register)
    helpers.signal.throwIfAborted()
    const gram = gramOfSums(sources.map(source => sampleRows(source, width, height)))
    const usable = usableGroups(groups)
    const reviewed = reviewRepetitions({
      groups: groups.map((group, g) => ({ ...group, accepted: usable[g]! })), integrals, gram, fixedChecks: repetitionChecks({ groups, meter, integrals, motion }),
      rejectedByPerson: before.rejections.map(({ repetition }) => repetition), acceptedByPerson: before.acceptedByPerson,
    })
    const rejections = [...before.rejections, ...reviewed.rejected.map(({ repetition, reason }) => ({ repetition, by: 'program', byId: null, reason }))].sort((a, b) => a.repetition - b.repetition)
    const manifest = await manifestBase(line, frequencyHz, payload.provenance, forces, sumsSha256)
    const { files, checks } = await writeFrameSet(helpers.workDir, { line, frequencyHz, groups: reviewed.groups, sources, sumsCrc: crcOfMember(digests, height, width), integrals, width, height, forces, checks: reviewed.checks, rejections, manifest }, pool)
    const flags = [...reviewed.flags, ...warningsOf(checks, reviewed.groups)]
    return { line, flags: flags.map(flag => named(flag, line, frequencyHz)), set: { frequencyHz, groups: reviewed.groups, checks, files, review: { ...marks, usable, ...before, rejections, flags, shifts: shifts.used } } }
  } catch (error) {
    if (!(error instanceof SolveError)) throw error
    return { line, flags: [named({ code: error.code, severity: 'problem', message: error.message }, line, frequencyHz)] }
  }
}

function meterColumns(bytes: Uint8Array): MeterColumns {
  const { light, clipped, black } = readNpz(bytes)
  return { light: light!.data, clipped: clipped!.data, black: black!.data }
}
