import { z } from 'zod'
import { flagSchema, lampPatchSchema, planLineSchema, rangeSchema, transferSchema } from '../measurement'
import { channelMappingSchema } from '../records'
import { acquisitionStates, jobStates, stages, uploadStates } from '../states'
import { idSchema, listQuerySchema, nameSchema, optionalText, timeSchema } from './common'

export const campaignCreateSchema = z.object({ name: nameSchema(160, 'a name'), specimen: optionalText(240), notes: optionalText(4000) })
export const campaignPatchSchema = z.object({ name: nameSchema(160, 'a name').optional(), specimen: optionalText(240).optional(), notes: optionalText(4000).optional() })

/** How far one planned or measured line of a campaign has come. */
export const coverageLineSchema = z.object({
  frequencyHz: z.number(),
  planned: z.boolean(),
  state: z.enum(['missing', 'shot', 'summed', 'released']),
  repetitionsPlanned: z.number().int(),
  repetitionsGood: z.number().int(),
  acquisitionId: idSchema.nullable(),
})
export type CoverageLine = z.infer<typeof coverageLineSchema>

export const campaignSchema = z.object({
  id: idSchema, name: z.string(), specimen: z.string().nullable(), notes: z.string().nullable(),
  createdAt: timeSchema, updatedAt: timeSchema, createdByName: z.string(),
  acquisitionCount: z.number().int(), frameSetCount: z.number().int(), needsEyeCount: z.number().int(),
  coverage: z.array(coverageLineSchema),
})
export type Campaign = z.infer<typeof campaignSchema>
export const campaignListQuerySchema = listQuerySchema.extend({ search: z.string().trim().max(120).optional() })

export const guestAccessSchema = z.object({ userId: idSchema })
export const guestSchema = z.object({ userId: idSchema, name: z.string(), email: z.string(), grantedAt: timeSchema })
export const guestListSchema = z.object({ items: z.array(guestSchema), candidates: z.array(z.object({ userId: idSchema, name: z.string(), email: z.string() })) })

export const cameraProfileSchema = z.object({
  id: idSchema, name: z.string(), frameRateHz: z.number().nullable(), frameExposureSeconds: z.number().nullable(),
  transfer: transferSchema, range: rangeSchema, millimetresPerPixel: z.number().nullable(),
})
export type CameraProfile = z.infer<typeof cameraProfileSchema>

const positive = (what: string, max: number) => z.number({ error: `Give ${what} as a number.` }).positive(`Give ${what} above 0.`).max(max, `${what[0]!.toUpperCase()}${what.slice(1)} is too large.`)

export const cameraProfileWriteSchema = z.object({
  name: nameSchema(120, 'a name'),
  frameRateHz: positive('the frame rate', 100_000).nullish(),
  frameExposureSeconds: positive('the exposure in seconds', 10).nullish(),
  transfer: transferSchema.default('auto'),
  range: rangeSchema.default('auto'),
  millimetresPerPixel: positive('the scale in mm per pixel', 1000).nullish(),
})

const acquisitionFields = {
  title: nameSchema(160, 'a title'),
  notes: optionalText(4000),
  cameraProfileId: idSchema.nullish(),
  frameExposureSeconds: positive('the exposure in seconds', 10).nullish(),
  transfer: transferSchema,
  range: rangeSchema,
  millimetresPerPixel: positive('the scale in mm per pixel', 1000).nullish(),
  plan: z.array(planLineSchema).max(500, 'A plan holds at most 500 lines.'),
  guardSeconds: z.number().min(0, 'The guard cannot be negative.').max(1, 'A guard above 1 s would leave no frames.'),
  autoRun: z.boolean(),
  lampPatch: lampPatchSchema.nullish(),
}
export const acquisitionCreateSchema = z.object({
  campaignId: idSchema,
  ...acquisitionFields,
  transfer: transferSchema.default('auto'),
  range: rangeSchema.default('auto'),
  plan: acquisitionFields.plan.default([]),
  guardSeconds: acquisitionFields.guardSeconds.default(0.001),
  autoRun: z.boolean().default(true),
})
export const acquisitionPatchSchema = z.object(acquisitionFields).partial()
export const acquisitionListQuerySchema = listQuerySchema.extend({ campaignId: idSchema.optional(), state: z.enum(acquisitionStates).optional(), search: z.string().trim().max(120).optional() })

export const uploadSchema = z.object({
  id: idSchema, acquisitionId: idSchema, acquisitionTitle: z.string(), kind: z.enum(['clip', 'record']), part: z.number().int(), filename: z.string(),
  bytes: z.number(), receivedBytes: z.number(), state: z.enum(uploadStates), sha256: z.string().nullable(), message: z.string().nullable(),
  createdAt: timeSchema, lastActivityAt: timeSchema, userId: idSchema, userName: z.string(),
})
export type Upload = z.infer<typeof uploadSchema>

/** Where one stage of an acquisition stands; `output` is what it found (shared/stageOutputs.ts). */
export const stageStatusSchema = z.object({
  stage: z.enum(stages),
  state: z.enum(['not yet', ...jobStates]),
  jobId: idSchema.nullable(),
  message: z.string().nullable(),
  finishedAt: timeSchema.nullable(),
})
export type StageStatus = z.infer<typeof stageStatusSchema>

export const acquisitionSummarySchema = z.object({
  id: idSchema, number: z.number().int(), campaignId: idSchema, campaignName: z.string(), title: z.string(), state: z.enum(acquisitionStates),
  /** What it waits for or what to do, in a sentence. */
  message: z.string(),
  lineCount: z.number().int(), createdAt: timeSchema, createdByName: z.string(), frameSetCount: z.number().int(),
})
export type AcquisitionSummary = z.infer<typeof acquisitionSummarySchema>

export const alignmentOutSchema = z.object({
  offsetSeconds: z.number(), driftPpm: z.number(), residual: z.number().nullable(), confidence: z.number().nullable(), method: z.enum(['light', 'manual']), version: z.number().int(),
  accepted: z.boolean(), authorName: z.string().nullable(), createdAt: timeSchema,
  evidence: z.object({ gain: z.number(), background: z.number(), secondBestRatio: z.number().nullable(), secondBestOffsetSeconds: z.number().nullable(), edges: z.number(), beat: z.boolean(), reasons: z.array(z.string()) }).nullable(),
})
export type AlignmentOut = z.infer<typeof alignmentOutSchema>
export const alignmentPutSchema = z.object({ offsetSeconds: z.number().min(-1e6).max(1e6), driftPpm: z.number().min(-10_000).max(10_000) })

export const acquisitionSchema = acquisitionSummarySchema.extend({
  notes: z.string().nullable(), cameraProfileId: idSchema.nullable(),
  frameExposureSeconds: z.number().nullable(), transfer: transferSchema, range: rangeSchema, millimetresPerPixel: z.number().nullable(),
  plan: z.array(planLineSchema), guardSeconds: z.number(), autoRun: z.boolean(), lampPatch: lampPatchSchema.nullable(), channels: channelMappingSchema.nullable(),
  flags: z.array(flagSchema), stages: z.array(stageStatusSchema), uploads: z.array(uploadSchema),
  /** What inspect found (ClipFacts) and the file behind it; null until then. */
  clip: z.record(z.string(), z.unknown()).nullable(),
  /** What record found (RecordFacts) and the file behind it; null until then. */
  record: z.record(z.string(), z.unknown()).nullable(),
  alignment: alignmentOutSchema.nullable(),
  frameSets: z.array(z.object({ id: idSchema, line: z.number().int(), frequencyHz: z.number(), state: z.enum(['draft', 'released']), repetitionsGood: z.number().int(), repetitions: z.number().int() })),
})
export type Acquisition = z.infer<typeof acquisitionSchema>

export const processSchema = z.object({ from: z.enum(['inspect', 'meter', 'record', 'align', 'cut', 'sum', 'check']).optional() })
