import { mkdir, readFile, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { FileStore } from '../../server/store/fileStore'
import type { FrameLoss, Group, PlanLine } from '../../shared/measurement'
import type { FactsOf } from '../../shared/stageOutputs'
import type { Situation } from '../queue/inputs'
import { lossFlags, outsideFlags, writeTimes } from './align'
import { publishAlignment, type FoundAlignment } from './alignments'
import { clipPathsOf, openClip, type ClipPaths } from './clipSource'
import { publishCutList } from './cut'
import { exposureOf, factsOf, pathOf, readFloat32, readFloat64 } from './inputs'
import { keepLight } from './keepLight'
import { emptyLight, readLightFile, timingLight, writeLight } from './lightFile'
import type { RecordRegimes } from './record'
import { refineWithAllLight, type Refined } from './refine'
import { defineStage, type StageHelpers, type StageResult } from './stage'
import { kernelFor, makeSums, type SumFile } from './sumFiles'

interface Payload {
  source: ClipPaths
  /** Names the clip as it was read: sums of the same clip can be built upon. */
  clipKey: string
  groups: string
  cutListVersion: number
  manualCutList: boolean
  alignment: { version: number, offsetSeconds: number, driftPpm: number, losses: FrameLoss[] }
  alignKey: string
  /** Made from a glance: to be made anew with every frame's light. */
  refine: boolean
  /** What an earlier run has made of the same alignment and the same light. */
  refined: RefinedBefore | null
  light: string | null
  bases: SumFile[]
  frameTimes: { read: string, aligned: string }
  predicted: string
  illumination: string
  regimes: string
  sampleRateHz: number
  darkLevel: number | null
  exposureSeconds: number
  guardSeconds: number
  plan: PlanLine[]
}

interface RefinedBefore {
  alignment: Payload['alignment']
  frameTimes: string
  predicted: string
}

interface Result extends StageResult {
  groups: Group[]
  recut: boolean
  alignment: FoundAlignment | null
}

export const sumFileName = (groupId: string) => `sum-${groupId}`

/**
 * Adds every group's frames in linear light, exactly, and measures every frame on the way: the one decoding of the
 * whole clip. With all the light the alignment is made anew and the cut corrected; then, and whenever the cut list
 * changes later, only frames that changed sides are decoded.
 */
export const sum = defineStage<Payload, Result>({
  load(situation, store) {
    const { record, darkLevel } = factsOf(situation, 'record')
    const { version, manual } = factsOf(situation, 'cut')
    const { from, ...alignment } = factsOf(situation, 'align')
    const meter = situation.outputs.meter!
    return {
      source: clipPathsOf(situation, store),
      clipKey: situation.outputs.inspect!.outputKey,
      groups: pathOf(situation, store, 'cut', 'groups'),
      cutListVersion: version,
      manualCutList: manual,
      alignment: { version: alignment.version, offsetSeconds: alignment.offsetSeconds, driftPpm: alignment.driftPpm, losses: alignment.losses },
      alignKey: situation.outputs.align!.outputKey,
      refine: from === 'glance',
      refined: refinedBefore(situation, store),
      light: meter.files.light ? pathOf(situation, store, 'meter', 'light') : null,
      bases: basesOf(situation, store),
      frameTimes: { read: pathOf(situation, store, 'inspect', 'frame-times'), aligned: pathOf(situation, store, 'align', 'frame-times') },
      predicted: pathOf(situation, store, 'align', 'predicted'),
      illumination: pathOf(situation, store, 'record', 'illumination'),
      regimes: pathOf(situation, store, 'record', 'regimes'),
      sampleRateHz: record.sampleRateHz, darkLevel,
      exposureSeconds: exposureOf(situation),
      guardSeconds: situation.acquisition.guardSeconds,
      plan: situation.acquisition.plan,
    }
  },

  async run(payload, helpers) {
    const source = await openClip(payload.source)
    const kernel = kernelFor(source.clip)
    const proposed = JSON.parse(await readFile(payload.groups, 'utf8')) as Group[]
    const files: Record<string, string> = {}
    const decodeAll = !payload.light || !payload.bases.length
    const light = decodeAll ? emptyLight(source.clip.frameCount, source.lampPatch !== null) : await readLightFile(payload.light!)
    let made = await makeSums({ source, kernel, groups: proposed, bases: payload.bases, folder: await folderIn(helpers, 'sums'), ...decodeAll ? { light } : {} }, helpers)
    let decoded = made.frames
    if (decodeAll && !payload.light) await writeLight(files.light = join(helpers.workDir, 'light.npz'), light)

    const known = payload.manualCutList && !decodeAll ? payload.refined : null
    const refined = payload.refine && !known ? await refine(payload, timingLight(light), proposed) : null
    const groups = refined?.groups ?? proposed
    const recut = JSON.stringify(groups) !== JSON.stringify(proposed)
    if (recut) {
      made = await makeSums({ source, kernel, groups, bases: [...made.sums.values()], folder: await folderIn(helpers, 'corrected') }, helpers)
      decoded += made.frames
    }
    for (const [id, { path }] of made.sums) files[sumFileName(id)] = path
    Object.assign(files, await writeTiming(payload, refined, known, groups, helpers.workDir))
    const timing = refined?.alignment ?? known?.alignment ?? payload.alignment
    const used = groups.reduce((total, group) => total + group.frameCount, 0)
    helpers.log(`${decoded} frames decoded for ${groups.length} sums.`)
    return {
      state: refined && !refined.sure ? 'needs review' : 'done',
      message: refined && !refined.sure
        ? `With every frame measured, the alignment is no longer sure. ${refined.alignment.evidence.reasons[0] ?? ''} Accept or correct it on the acquisition.`
        : `${groups.length} groups, ${used} of ${source.clip.frameCount} frames added.`,
      facts: {
        clipKey: payload.clipKey, cutListVersion: payload.cutListVersion, frameCount: source.clip.frameCount, refined: payload.refine, alignKey: payload.alignKey,
        // A refined alignment gets its version when it is published.
        alignment: { version: refined ? 0 : (known ?? payload).alignment.version, offsetSeconds: timing.offsetSeconds, driftPpm: timing.driftPpm, losses: timing.losses },
        spans: groups.filter(group => made.sums.has(group.id)).map(({ id, firstFrame, frameCount }) => ({ id, firstFrame, frameCount, ...made.sums.get(id)!.digest })),
      },
      files,
      flags: payload.refine ? [...outsideFlags(await readFloat64(files.predicted!)), ...lossFlags(timing.losses)].map(flag => ({ ...flag, stage: 'sum' })) : [],
      groups, recut, alignment: refined?.alignment ?? null,
    }
  },

  async publish(transaction, { situation, result, keys }) {
    await keepLight(transaction, situation, keys)
    const facts = result.facts as FactsOf<'sum'>
    if (result.alignment) facts.alignment.version = await publishAlignment(transaction, situation.acquisition.id, foundBy(result.alignment), result.state === 'done')
    if (result.recut) facts.cutListVersion = await publishCutList(transaction, situation.acquisition.id, facts.alignment.version, result.groups)
  },
})

const foundBy = ({ offsetSeconds, driftPpm, residual, confidence, evidence }: FoundAlignment): FoundAlignment => ({ offsetSeconds, driftPpm, residual, confidence, evidence })

/** Sums that an earlier run left of the same clip. */
function basesOf({ outputs }: Situation, store: FileStore): SumFile[] {
  const facts = outputs.sum?.facts as unknown as Partial<FactsOf<'sum'>> | undefined
  if (!facts?.spans || facts.clipKey !== outputs.inspect!.outputKey) return []
  return facts.spans.flatMap(({ id, firstFrame, frameCount, sha256, crc }) => {
    const key = outputs.sum!.files[sumFileName(id)]
    return key ? [{ path: store.localPath(key), firstFrame, frameCount, digest: { sha256, crc } }] : []
  })
}

/** With a person's cut list nothing else follows from the alignment with every frame, so it need not be made again. */
function refinedBefore(situation: Situation, store: FileStore): RefinedBefore | null {
  const facts = situation.outputs.sum?.facts as unknown as Partial<FactsOf<'sum'>> | undefined
  if (!facts?.refined || facts.alignKey !== situation.outputs.align!.outputKey || !situation.outputs.sum!.inputsKey) return null
  return { alignment: facts.alignment!, frameTimes: pathOf(situation, store, 'sum', 'frame-times'), predicted: pathOf(situation, store, 'sum', 'predicted') }
}

async function refine(payload: Payload, frameLight: Float64Array, groups: Group[]): Promise<Refined> {
  const { regimes } = JSON.parse(await readFile(payload.regimes, 'utf8')) as RecordRegimes
  const { sampleRateHz, darkLevel, exposureSeconds, guardSeconds, plan, alignment, manualCutList } = payload
  return refineWithAllLight({
    frameLight, frameTimesSeconds: await readFloat64(payload.frameTimes.read), illumination: await readFloat32(payload.illumination),
    exposureSeconds, sampleRateHz, darkLevel, previous: alignment, regimes, guardSeconds, plan, groups, keepGroups: manualCutList,
  })
}

/** What the check stage and the pages read of the timing in force. */
async function writeTiming({ frameTimes, predicted }: Payload, refined: Refined | null, known: RefinedBefore | null, groups: Group[], workDir: string): Promise<Record<string, string>> {
  const files = { 'groups': join(workDir, 'groups.json'), 'frame-times': join(workDir, 'frame-times.npy'), 'predicted': join(workDir, 'predicted.npy') }
  await writeFile(files.groups, JSON.stringify(groups))
  await writeFile(files['frame-times'], await readFile(known?.frameTimes ?? frameTimes.aligned))
  await writeFile(files.predicted, await readFile(known?.predicted ?? predicted))
  if (refined) {
    await writeTimes(files['frame-times'], refined.frameTimesSeconds)
    await writeTimes(files.predicted, refined.alignment.predicted)
  }
  return files
}

async function folderIn({ workDir }: StageHelpers, name: string): Promise<string> {
  const folder = join(workDir, name)
  await mkdir(folder, { recursive: true })
  return folder
}
