import { randomUUID } from 'node:crypto'
import { readFile } from 'node:fs/promises'
import { and, eq, isNull } from 'drizzle-orm'
import { frameSetFiles, frameSets } from '../../server/db/schema'
import { checkDefinitions, type CheckDefinition, type CheckResult } from '../../shared/checks'
import type { ClipFacts, Flag, Group } from '../../shared/measurement'
import { readNpz } from '../formats/npz'
import { checkLine, proposeRejections, type CheckInput } from '../imaging/checks'
import { SolveError, solveFrameSet, type FrameSetSolution } from '../imaging/solve'
import { exposureIntegrals } from '../signal/exposureIntegrals'
import { createLightIntegrals, type FrameTiming, type LightIntegrals } from '../signal/lightPrediction'
import { fitSine3 } from '../signal/sineFit'
import { cutListOf } from './cutList'
import { linesOf } from './cut'
import { writeFrameSet, type SetFile } from './frameSetWriter'
import { exposureOf, factsOf, pathOf, readFloat32, readFloat64 } from './inputs'
import { provenanceOf, type Provenance } from './provenance'
import { defineStage, type StageHelpers, type StageResult } from './stage'
import { sumFileName } from './sum'

interface Payload {
  clip: ClipFacts
  groups: Group[]
  cutListVersion: number
  sums: Record<string, string>
  meter: string
  frameTimes: string
  illumination: string
  force: string | null
  sampleRateHz: number
  darkLevel: number | null
  alignment: { offsetSeconds: number, driftPpm: number }
  exposureSeconds: number
  provenance: Provenance
}

interface CheckedSet {
  line: number
  frequencyHz: number
  groups: Group[]
  checks: CheckResult[]
  files: SetFile[]
}

interface Result extends StageResult {
  sets: CheckedSet[]
}

/** Checks every repetition, leaves bumped ones out, solves each line and writes its frame set. */
export const check = defineStage<Payload, Result>({
  load(situation, store) {
    const { groups, version } = cutListOf(situation)
    const { record, darkLevel } = factsOf(situation, 'record')
    const alignment = factsOf(situation, 'align')
    const used = groups.filter(group => group.frameCount > 0)
    return {
      clip: factsOf(situation, 'inspect').clip,
      groups: used,
      cutListVersion: version,
      sums: Object.fromEntries(used.map(group => [group.id, pathOf(situation, store, 'sum', sumFileName(group.id))])),
      meter: pathOf(situation, store, 'meter', 'meter'),
      frameTimes: pathOf(situation, store, 'inspect', 'frame-times'),
      illumination: pathOf(situation, store, 'record', 'illumination'),
      force: record.channels.some(channel => channel.role === 'force') ? pathOf(situation, store, 'record', 'force') : null,
      sampleRateHz: record.sampleRateHz,
      darkLevel,
      alignment: { offsetSeconds: alignment.offsetSeconds, driftPpm: alignment.driftPpm },
      exposureSeconds: exposureOf(situation),
      provenance: provenanceOf(situation, version),
    }
  },

  async run(payload, helpers) {
    const lines = linesOf(payload.groups).filter(line => line.complete)
    const integrals = createLightIntegrals(await readFloat32(payload.illumination), payload.sampleRateHz, payload.darkLevel ?? 0)
    const timing: FrameTiming = { ...payload.alignment, exposureSeconds: payload.exposureSeconds, frameTimesSeconds: await readFloat64(payload.frameTimes) }
    const sets: CheckedSet[] = []
    const flags: Flag[] = []
    for (const [index, { line, frequencyHz }] of lines.entries()) {
      helpers.progress({ progress: index / lines.length })
      const set = await checkOne(payload, integrals, timing, line, frequencyHz, helpers)
      flags.push(...set.flags)
      if (set.set) sets.push(set.set)
    }
    const problems = flags.filter(flag => flag.severity === 'problem')
    return {
      state: problems.length ? 'needs review' : 'done',
      message: problems[0]?.message ?? `${sets.length} frame ${sets.length === 1 ? 'set' : 'sets'} ready${flags.length ? `. ${flags[0]!.message}` : '.'}`,
      facts: { frameSetIds: [] }, files: Object.fromEntries(sets.flatMap(set => set.files.map(file => [file.storeName, file.path]))), flags: flags.map(flag => ({ ...flag, stage: 'check' })), sets,
    }
  },

  async publish(transaction, { situation, payload, result, keys }) {
    const { id } = situation.acquisition
    const now = new Date()
    await transaction.update(frameSets).set({ supersededAt: now }).where(and(eq(frameSets.acquisitionId, id), isNull(frameSets.supersededAt)))
    const ids: string[] = []
    for (const set of result.sets) {
      const frameSetId = randomUUID()
      ids.push(frameSetId)
      await transaction.insert(frameSets).values({
        id: frameSetId, acquisitionId: id, line: set.line, frequencyHz: set.frequencyHz, state: 'draft', cutListVersion: payload.cutListVersion, checks: set.checks, groups: set.groups,
        width: payload.clip.width, height: payload.clip.height, createdAt: now,
      })
      await transaction.insert(frameSetFiles).values(set.files.map(({ name, bytes, sha256, contentType, storeName }) => ({ frameSetId, name, bytes, sha256, contentType, fileKey: keys[storeName]! })))
    }
    result.facts.frameSetIds = ids
  },
})

async function checkOne(payload: Payload, light: LightIntegrals, timing: FrameTiming, line: number, frequencyHz: number, helpers: StageHelpers): Promise<{ set: CheckedSet | null, flags: Flag[] }> {
  const { width, height } = payload.clip
  const groups = payload.groups.filter(group => group.line === line).map(group => ({ ...group, flags: [...group.flags] }))
  const sums: Uint32Array[] = []
  for (const group of groups) {
    const bytes = await readFile(payload.sums[group.id]!)
    sums.push(new Uint32Array(bytes.buffer, bytes.byteOffset, bytes.byteLength / 4))
  }
  const integrals = Float64Array.from(groups.flatMap(({ firstFrame, frameCount }) => {
    const { A, C, S } = exposureIntegrals(light, timing, { frequencyHz, firstFrame, frameCount })
    return [A, C, S]
  }))
  const input: CheckInput = { groups, meter: meterColumns(await readFile(payload.meter)), integrals, sums, width, height }
  const solve = () => solveFrameSet({ sums, roles: groups.map(group => group.role), integrals, frames: groups.map(group => group.frameCount), accepted: groups.map(group => group.accepted), width, height })
  const named = (flag: Flag): Flag => ({ ...flag, message: `Line ${line} (${Number(frequencyHz.toFixed(2))} Hz): ${flag.message}` })
  try {
    let solution: FrameSetSolution = solve()
    const checks = checkLine({ ...input, solution })
    const open = new Set(groups.filter(group => group.accepted).map(group => group.repetition))
    const { rejected, flags } = proposeRejections(checks.filter(({ repetition }) => repetition === null || open.has(repetition)))
    if (rejected.length) {
      for (const group of groups) if (rejected.includes(group.repetition)) group.accepted = false
      solution = solve()
    }
    const files = await writeFrameSet(helpers.workDir, { line, frequencyHz, groups, sums, integrals, solution, width, height, force: await forceAt(payload, timing, frequencyHz, groups), checks, provenance: payload.provenance })
    return { set: { line, frequencyHz, groups, checks, files }, flags: [...flags, ...warningsOf(checks)].map(named) }
  } catch (error) {
    if (!(error instanceof SolveError)) throw error
    return { set: null, flags: [named({ code: error.code, severity: 'problem', message: error.message })] }
  }
}

function meterColumns(bytes: Uint8Array): CheckInput['meter'] {
  const { light, clipped, black } = readNpz(bytes)
  return { light: light!.data, clipped: clipped!.data, black: black!.data }
}

/** Failed checks that reject nothing are told once a line and check. */
function warningsOf(checks: CheckResult[]): Flag[] {
  const failed = checks.filter(({ checkId, passed }) => !passed && !(checkDefinitions as Record<string, CheckDefinition>)[checkId]?.rejects)
  return [...new Map(failed.map(result => [result.checkId, result])).values()].map(({ checkId, message }) => ({ code: checkId, severity: 'warning', message }))
}

/** Complex amplitude F of the force, f(t) = Re{F e^{jωt}}, over the span of the line's accepted groups. */
async function forceAt({ force, sampleRateHz }: Payload, timing: FrameTiming, frequencyHz: number, groups: Group[]): Promise<[number, number] | null> {
  const lit = groups.filter(group => group.accepted && group.role !== 'dark')
  if (!force || !lit.length) return null
  const samples = await readFloat32(force)
  const timeOf = (frame: number) => timing.offsetSeconds + (1 + timing.driftPpm * 1e-6) * timing.frameTimesSeconds[frame]!
  const first = Math.max(0, Math.ceil(timeOf(Math.min(...lit.map(group => group.firstFrame))) * sampleRateHz))
  const last = Math.min(samples.length - 1, Math.floor((timeOf(Math.max(...lit.map(group => group.firstFrame + group.frameCount - 1))) + timing.exposureSeconds) * sampleRateHz))
  if (last - first < 16) return null
  const { sine, cosine } = fitSine3(samples, sampleRateHz, frequencyHz, { first, count: last - first + 1 })
  return [cosine, -sine]
}
