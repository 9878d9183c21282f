import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { and, eq } from 'drizzle-orm'
import { alignments } from '../../server/db/schema'
import { alignmentReviewBelow, type Flag, type FrameLoss } from '../../shared/measurement'
import { writeNpy } from '../formats/npy'
import { alignClip, judgeAlignment, type AlignInput, type AlignResult } from '../signal/align'
import { correctFrameTimes } from '../signal/frameLoss'
import { publishAlignment, type FoundAlignment } from './alignments'
import { clipPathsOf, openClip, type ClipPaths } from './clipSource'
import { decodeClip } from './decode'
import { exposureOf, factsOf, pathOf, readFloat32, readFloat64 } from './inputs'
import { alignByGlances, glanceSuffices } from './glanceAlign'
import { keepLight } from './keepLight'
import { emptyLight, readLightFile, timingLight, writeLight } from './lightFile'
import { defineStage, type StageHelpers, type StageResult } from './stage'
import { lightSink, type ClipSource } from './sumFiles'

interface Payload {
  source: ClipPaths
  /** Light of some frames, and of all of them once somebody has measured it. */
  glance: string
  light: string | null
  frameTimes: string
  illumination: string
  sampleRateHz: number
  darkLevel: number | null
  exposureSeconds: number
  /** A person's alignment is judged, not searched. */
  manual: { version: number, offsetSeconds: number, driftPpm: number } | null
}

interface Result extends StageResult {
  alignment: FoundAlignment
}

/**
 * Ties camera time to record time by the light: what the frames measured against what the record predicts. A glance at
 * the clip suffices as a rule, and the sum stage confirms it with all frames; where it does not, every frame is measured here.
 */
export const align = defineStage<Payload, Result>({
  load(situation, store) {
    const { record, darkLevel } = factsOf(situation, 'record')
    const manual = situation.manualAlignment
    return {
      source: clipPathsOf(situation, store),
      glance: pathOf(situation, store, 'meter', 'glance'),
      light: situation.outputs.meter?.files.light ? pathOf(situation, store, 'meter', 'light') : null,
      frameTimes: pathOf(situation, store, 'inspect', 'frame-times'),
      illumination: pathOf(situation, store, 'record', 'illumination'),
      sampleRateHz: record.sampleRateHz,
      darkLevel,
      exposureSeconds: exposureOf(situation),
      manual: manual && { version: manual.version, offsetSeconds: manual.offsetSeconds, driftPpm: manual.driftPpm },
    }
  },

  async run(payload, helpers) {
    const { glance, light, frameTimes, illumination, sampleRateHz, darkLevel, exposureSeconds, manual } = payload
    const input: AlignInput = {
      frameLight: timingLight(await readLightFile(manual && light ? light : glance)),
      frameTimesSeconds: await readFloat64(frameTimes),
      illumination: await readFloat32(illumination),
      exposureSeconds, sampleRateHz, darkLevel,
    }
    const files: Record<string, string> = {}
    const source = await openClip(payload.source)
    let result = manual ? judgeAlignment(input, manual) : await alignByGlances(source, input, helpers)
    let from: 'manual' | 'glance' | 'all' = manual ? 'manual' : 'glance'
    if (!manual && result.confidence < glanceSuffices) {
      const all = await lightOfAll(source, light, helpers, files)
      result = alignClip({ ...input, frameLight: all })
      from = 'all'
    }
    return { ...await describeAlignment(result, input, from, manual?.version ?? null, helpers.workDir, files) }
  },

  async publish(transaction, { situation, payload, result, keys }) {
    await keepLight(transaction, situation, keys)
    const { residual, confidence, evidence } = result.alignment
    if (payload.manual) {
      await transaction.update(alignments).set({ residual, confidence, evidence }).where(and(eq(alignments.acquisitionId, situation.acquisition.id), eq(alignments.version, payload.manual.version)))
      return
    }
    result.facts.version = await publishAlignment(transaction, situation.acquisition.id, result.alignment, result.state === 'done')
  },
})

/** Every frame's light: as it was measured before, or by decoding the clip now. */
async function lightOfAll(source: ClipSource, light: string | null, helpers: StageHelpers, files: Record<string, string>): Promise<Float64Array> {
  if (light) return timingLight(await readLightFile(light))
  helpers.log('The glance does not settle the alignment, so every frame is measured.')
  const measured = emptyLight(source.clip.frameCount, source.lampPatch !== null)
  const sink = lightSink(source, measured)
  await decodeClip(source.path, source.clip, helpers, sink)
  sink.finish()
  files.light = join(helpers.workDir, 'light.npz')
  await writeLight(files.light, measured)
  return timingLight(measured)
}

async function describeAlignment(found: AlignResult, input: AlignInput, from: 'manual' | 'glance' | 'all', manualVersion: number | null, workDir: string, files: Record<string, string>): Promise<Result> {
  const { offsetSeconds, driftPpm, residual, confidence, evidence, predicted, losses } = found
  files.predicted = join(workDir, 'predicted.npy')
  files['frame-times'] = join(workDir, 'frame-times.npy')
  await writeTimes(files.predicted, predicted)
  await writeTimes(files['frame-times'], correctFrameTimes(input.frameTimesSeconds, losses))
  const sure = from === 'all' ? confidence >= alignmentReviewBelow : true
  return {
    state: sure ? 'done' : 'needs review',
    message: `${manualVersion === null ? sure ? 'O' : 'Not sure: o' : 'Set by hand: o'}ffset ${offsetSeconds.toFixed(4)} s, drift ${driftPpm.toFixed(1)} ppm, residual ${(100 * residual).toFixed(2)} %. ${evidence.reasons[0] ?? ''}${sure ? '' : ' Accept or correct it on the acquisition.'}`,
    facts: { version: manualVersion ?? 0, offsetSeconds, driftPpm, evidence, from, losses },
    files,
    flags: [...outsideFlags(predicted), ...lossFlags(losses)].map(flag => ({ ...flag, stage: 'align' })),
    alignment: { offsetSeconds, driftPpm, residual, confidence, evidence },
  }
}

export async function writeTimes(path: string, data: Float64Array): Promise<void> {
  await writeFile(path, writeNpy({ dtype: 'float64', shape: [data.length], data }))
}

/** Frames exposed before the record began or after it ended belong to no group; a person should know how many. */
export function outsideFlags(predicted: Float64Array): Flag[] {
  const outside = predicted.reduce((count, value) => count + Number(Number.isNaN(value)), 0)
  if (!outside) return []
  return [{
    code: 'record-does-not-cover-clip', severity: outside / predicted.length > 0.02 ? 'warning' : 'note',
    message: `The record does not cover ${outside} of ${predicted.length} frames; they are left out. If lines are missing, upload the whole record.`,
  }]
}

export function lossFlags(losses: readonly FrameLoss[]): Flag[] {
  return losses.map(({ frame, uncertainFrames, lostFrames, lostSeconds }) => {
    const what = lostFrames >= 0 ? `${lostFrames} ${lostFrames === 1 ? 'frame is' : 'frames are'} missing before` : `${-lostFrames} ${lostFrames === -1 ? 'frame is' : 'frames are'} doubled before`
    const where = uncertainFrames > 0 ? `one of the frames ${frame - uncertainFrames} to ${frame}` : `frame ${frame}`
    return { code: 'frames-lost', severity: 'warning', message: `${what} ${where} although the timestamps run on (${(1000 * lostSeconds).toFixed(1)} ms by the light). Later frames are timed anew. Use a faster card or a lower bit rate.` }
  })
}
