import { z } from 'zod'
import { groupSchema } from '../measurement'
import { jobStates, stages } from '../states'
import { idSchema, listQuerySchema, timeSchema } from './common'

export const jobSchema = z.object({
  id: idSchema, stage: z.enum(stages), acquisitionId: idSchema, acquisitionNumber: z.number().int(), acquisitionTitle: z.string(), campaignId: idSchema, campaignName: z.string(),
  state: z.enum(jobStates), progress: z.number(), framesPerSecond: z.number().nullable(), etaSeconds: z.number().nullable(),
  attempts: z.number().int(), priority: z.number().int(), runnerId: idSchema.nullable(), runnerName: z.string().nullable(),
  message: z.string().nullable(), errorCode: z.string().nullable(),
  createdAt: timeSchema, startedAt: timeSchema.nullable(), finishedAt: timeSchema.nullable(),
})
export type Job = z.infer<typeof jobSchema>
export const jobDetailSchema = jobSchema.extend({ log: z.string() })
export const jobListQuerySchema = listQuerySchema.extend({ acquisitionId: idSchema.optional(), state: z.enum(jobStates).optional() })
export const jobPatchSchema = z.object({ priority: z.number().int().min(0).max(1000) })

export const runnerSchema = z.object({
  id: idSchema, name: z.string(), host: z.string(), cores: z.number().int(), slots: z.number().int(), alive: z.boolean(), startedAt: timeSchema, beatAt: timeSchema,
  /** What it did lately, oldest first: its lane on the Queue page. */
  history: z.array(z.object({ jobId: idSchema, stage: z.enum(stages), state: z.enum(jobStates), startedAt: timeSchema, finishedAt: timeSchema.nullable() })),
})
export type Runner = z.infer<typeof runnerSchema>

export const queueStatusSchema = z.object({ paused: z.boolean(), counts: z.record(z.string(), z.number()), framesPerSecond: z.number(), diskFreeBytes: z.number() })
export type QueueStatus = z.infer<typeof queueStatusSchema>

export const checkResultSchema = z.object({ checkId: z.string(), repetition: z.number().int().nullable(), value: z.number().nullable(), unit: z.string(), limit: z.number().nullable(), passed: z.boolean(), message: z.string() })

/** A repetition that is left out; `by` is a person's name or `program`. */
export const rejectionSchema = z.object({ repetition: z.number().int(), by: z.string(), byId: idSchema.nullable(), reason: z.string() })
export type Rejection = z.infer<typeof rejectionSchema>
/** Every time a person solved the set again: who, when, and what was left out from then on. */
export const solveHistorySchema = z.object({ at: timeSchema, byName: z.string(), byId: idSchema, rejected: z.array(z.number().int()) })
export type SolveHistory = z.infer<typeof solveHistorySchema>
export const solveSchema = z.object({ reject: z.array(z.number().int().min(0, 'Repetitions count from 1.')).max(1000).optional() })

export const frameSetSchema = z.object({
  id: idSchema, acquisitionId: idSchema, acquisitionNumber: z.number().int(), acquisitionTitle: z.string(), campaignId: idSchema, campaignName: z.string(),
  line: z.number().int(), frequencyHz: z.number(), state: z.enum(['draft', 'released']), superseded: z.boolean(), cutListVersion: z.number().int(),
  width: z.number().int(), height: z.number().int(), millimetresPerPixel: z.number().nullable(),
  checks: z.array(checkResultSchema), groups: z.array(groupSchema),
  files: z.array(z.object({ name: z.string(), bytes: z.number(), sha256: z.string() })),
  rejections: z.array(rejectionSchema), history: z.array(solveHistorySchema),
  releasedByName: z.string().nullable(), releasedAt: timeSchema.nullable(), releaseNote: z.string().nullable(), createdAt: timeSchema,
})
export type FrameSet = z.infer<typeof frameSetSchema>
export const frameSetListQuerySchema = listQuerySchema.extend({ acquisitionId: idSchema.optional(), campaignId: idSchema.optional() })
export const releaseSchema = z.object({ note: z.string().trim().min(1, 'Say in a sentence what you checked.').max(2000) })

export const cutListSchema = z.object({ version: z.number().int(), alignmentVersion: z.number().int(), authorName: z.string().nullable(), createdAt: timeSchema, groups: z.array(groupSchema) })
export type CutList = z.infer<typeof cutListSchema>
export const cutListPutSchema = z.object({ groups: z.array(groupSchema).min(1, 'A cut list needs at least one group.').max(5000) })

/** Columns ≤ frames; each column is the mean of the frames in it. `predicted` is null before alignment. */
export const lightQuerySchema = z.object({ from: z.coerce.number().int().min(0).optional(), to: z.coerce.number().int().min(0).optional(), columns: z.coerce.number().int().min(1).max(4000).default(1000) })
export const lightSchema = z.object({ frames: z.array(z.number()), measured: z.array(z.number().nullable()), predicted: z.array(z.number().nullable()).nullable() })
export type Light = z.infer<typeof lightSchema>

export const channelQuerySchema = z.object({ from: z.coerce.number().optional(), to: z.coerce.number().optional(), columns: z.coerce.number().int().min(1).max(4000).default(1000) })
export const channelEnvelopeSchema = z.object({ fromSeconds: z.number(), toSeconds: z.number(), unit: z.string().nullable(), minimum: z.array(z.number()), maximum: z.array(z.number()) })
export type ChannelEnvelope = z.infer<typeof channelEnvelopeSchema>

export const healthSchema = z.object({ status: z.enum(['ok', 'starting', 'degraded']), database: z.enum(['ok', 'away']), runners: z.number().int(), diskFreeBytes: z.number(), version: z.string() })

/** What needs this person now. Each entry is a sentence and where to go. */
export const homeItemSchema = z.object({ kind: z.enum(['upload', 'record missing', 'review', 'failed', 'disk', 'release', 'processing', 'ready']), message: z.string(), to: z.string(), at: timeSchema.nullable() })
export type HomeItem = z.infer<typeof homeItemSchema>
export const homeSchema = z.object({ items: z.array(homeItemSchema), counts: z.record(z.string(), z.number()) })
export type Home = z.infer<typeof homeSchema>
