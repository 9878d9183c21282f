import { readFile, writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import { and, desc, eq } from 'drizzle-orm'
import { alignments } from '../../server/db/schema'
import { alignmentReviewBelow, type AlignmentEvidence, type Flag } from '../../shared/measurement'
import { writeNpy } from '../formats/npy'
import { readNpz } from '../formats/npz'
import { alignClip, judgeAlignment } from '../signal/align'
import { exposureOf, factsOf, pathOf, readFloat32, readFloat64 } from './inputs'
import { defineStage, type StageResult } from './stage'

interface Payload {
  meter: string
  frameTimes: string
  illumination: string
  sampleRateHz: number
  darkLevel: number | null
  exposureSeconds: number
  /** A person's alignment is judged, not searched. */
  manual: { version: number, offsetSeconds: number, driftPpm: number } | null
}

interface Result extends StageResult {
  alignment: { offsetSeconds: number, driftPpm: number, residual: number, confidence: number, evidence: AlignmentEvidence }
}

/** Ties camera time to record time by the light: what the frames measured against what the record predicts. */
export const align = defineStage<Payload, Result>({
  load(situation, store) {
    const { record, darkLevel } = factsOf(situation, 'record')
    const manual = situation.manualAlignment
    return {
      meter: pathOf(situation, store, 'meter', 'meter'),
      frameTimes: pathOf(situation, store, 'inspect', 'frame-times'),
      illumination: pathOf(situation, store, 'record', 'illumination'),
      sampleRateHz: record.sampleRateHz,
      darkLevel,
      exposureSeconds: exposureOf(situation),
      manual: manual && { version: manual.version, offsetSeconds: manual.offsetSeconds, driftPpm: manual.driftPpm },
    }
  },

  async run({ meter, frameTimes, illumination, sampleRateHz, darkLevel, exposureSeconds, manual }, { workDir }) {
    const input = {
      frameLight: readNpz(await readFile(meter)).light!.data as Float64Array,
      frameTimesSeconds: await readFloat64(frameTimes),
      illumination: await readFloat32(illumination),
      exposureSeconds, sampleRateHz, darkLevel,
    }
    const { offsetSeconds, driftPpm, residual, confidence, evidence, predicted } = manual ? judgeAlignment(input, manual) : alignClip(input)
    const file = join(workDir, 'predicted.npy')
    await writeFile(file, writeNpy({ dtype: 'float64', shape: [predicted.length], data: predicted }))
    const sure = manual !== null || confidence >= alignmentReviewBelow
    return {
      state: sure ? 'done' : 'needs review',
      message: `${manual ? 'Set by hand: o' : sure ? 'O' : 'Not sure: o'}ffset ${offsetSeconds.toFixed(4)} s, drift ${driftPpm.toFixed(1)} ppm, residual ${(100 * residual).toFixed(2)} %. ${evidence.reasons[0] ?? ''}${sure ? '' : ' Accept or correct it on the acquisition.'}`,
      facts: { version: manual?.version ?? 0, offsetSeconds, driftPpm, evidence },
      files: { predicted: file },
      flags: outsideFlags(predicted),
      alignment: { offsetSeconds, driftPpm, residual, confidence, evidence },
    }
  },

  async publish(transaction, { situation, payload, result }) {
    const { id } = situation.acquisition
    const { residual, confidence, evidence } = result.alignment
    if (payload.manual) {
      await transaction.update(alignments).set({ residual, confidence, evidence }).where(and(eq(alignments.acquisitionId, id), eq(alignments.version, payload.manual.version)))
      return
    }
    const [newest] = await transaction.select({ version: alignments.version }).from(alignments).where(eq(alignments.acquisitionId, id)).orderBy(desc(alignments.version)).limit(1).for('update')
    const version = (newest?.version ?? 0) + 1
    await transaction.insert(alignments).values({ acquisitionId: id, version, ...result.alignment, method: 'light', accepted: result.state === 'done', authorId: null, createdAt: new Date() })
    result.facts.version = version
  },
})

/** Frames exposed before the record began or after it ended belong to no group; a person should know how many. */
function outsideFlags(predicted: Float64Array): Flag[] {
  const outside = predicted.reduce((count, value) => count + Number(Number.isNaN(value)), 0)
  if (!outside) return []
  const share = outside / predicted.length
  return [{
    code: 'record-does-not-cover-clip', severity: share > 0.02 ? 'warning' : 'note', stage: 'align',
    message: `The record does not cover ${outside} of ${predicted.length} frames; they are left out. If lines are missing, upload the whole record.`,
  }]
}
