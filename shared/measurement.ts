/**
 * Words and shapes of the measurement, known to client, server and jobs.
 *
 * Time axes. *Clip time* starts at 0 with the start of exposure of the first decoded frame. *Record time* starts
 * at 0 with the first sample of the record; sample i lies at i / sampleRateHz.
 *     record time = offsetSeconds + (1 + driftPpm·1e-6) · clip time
 *
 * Lamp phase. A harmonic lamp is written L(t) = L̄·(1 + m·sin(ωt + φ)) in record time: φ is `lampPhaseDeg` in
 * (−180, 180], m is `depth`. A sine lamp has φ = 0°, a cosine lamp φ = 90°.
 *
 * Light. Linear light E is 1 at nominal white; sums count `round(50000·E)` per frame (see jobs/media/transfer.ts).
 */
import { z } from 'zod'

export const transferSchema = z.enum(['auto', 'bt709', 'srgb', 'linear', 'gamma22'])
export type Transfer = z.infer<typeof transferSchema>
/** A transfer that has been decided: never `auto`. */
export type KnownTransfer = Exclude<Transfer, 'auto'>

export const rangeSchema = z.enum(['auto', 'limited', 'full'])
export type CodeRange = z.infer<typeof rangeSchema>
export type KnownCodeRange = Exclude<CodeRange, 'auto'>

export const groupRoleSchema = z.enum(['dark', 'reference', 'phase'])
export type GroupRole = z.infer<typeof groupRoleSchema>

/** Something a person should know. `code` is kebab-case and stable, `message` a sentence that says what to do. */
export const flagSchema = z.object({
  code: z.string(),
  severity: z.enum(['note', 'warning', 'problem']),
  message: z.string(),
  stage: z.string().optional(),
})
export type Flag = z.infer<typeof flagSchema>

export const planLineSchema = z.object({
  frequencyHz: z.number().positive('Give the frequency in Hz, above 0.').max(1e6),
  repetitions: z.number().int().min(1).max(100).optional(),
})
export type PlanLine = z.infer<typeof planLineSchema>

/** A part of the picture that sees the lamp itself (a diffuser, a white card). Pixels; the first row and column count 0. */
export const lampPatchSchema = z.object({
  left: z.number().int().min(0), top: z.number().int().min(0),
  width: z.number().int().min(1), height: z.number().int().min(1),
}, 'Give the lamp patch as four whole numbers in pixels: left, top, width, height.')
export type LampPatch = z.infer<typeof lampPatchSchema>

/** Facts of a clip's video stream, found by the inspect stage. */
export const clipFactsSchema = z.object({
  container: z.string(),
  codec: z.string(),
  width: z.number().int(),
  height: z.number().int(),
  pixelFormat: z.string(),
  bitDepth: z.number().int(),
  /** Exact rate as the stream states it, e.g. 30000/1001. */
  frameRate: z.object({ numerator: z.number().int(), denominator: z.number().int() }),
  frameRateHz: z.number(),
  durationSeconds: z.number(),
  /** Frames that the decoder hands out, counted from packets; `containerFrameCount` is what the header claims. */
  frameCount: z.number().int(),
  containerFrameCount: z.number().int().nullable(),
  variableRate: z.boolean(),
  range: z.enum(['limited', 'full']),
  rangeSource: z.enum(['stream', 'setting', 'assumed']),
  transfer: z.enum(['bt709', 'srgb', 'linear', 'gamma22']),
  transferSource: z.enum(['stream', 'setting', 'assumed']),
  audioTracks: z.number().int(),
  bitsPerPixel: z.number(),
})
export type ClipFacts = z.infer<typeof clipFactsSchema>

/** A stretch of record with one lamp state. Times are record seconds; levels are in record units. */
export interface Regime {
  kind: 'dark' | 'constant' | 'harmonic'
  startSeconds: number
  endSeconds: number
  /** Mean lamp signal, dark level *not* subtracted. */
  level: number
  /** Harmonic regimes only, null otherwise. */
  frequencyHz: number | null
  lampPhaseDeg: number | null
  /** Modulation depth after the dark level has been subtracted. */
  depth: number | null
  /** Total harmonic distortion plus residual over the fundamental, 0…1. */
  distortion: number | null
  /** Standard deviations from the noise; the phase's holds in the regime's middle, at time zero the frequency's turns it further. */
  frequencyDeviationHz?: number | null
  phaseDeviationDeg?: number | null
  flags: Flag[]
}

export const alignmentSchema = z.object({
  offsetSeconds: z.number(),
  driftPpm: z.number(),
  /** rms of measured minus predicted frame light over the span of the predicted light, 0…1. */
  residual: z.number(),
  /** 0…1; below `alignmentReviewBelow` an automatic run stops for review. */
  confidence: z.number(),
  method: z.enum(['light', 'manual']),
  version: z.number().int(),
})
export type Alignment = z.infer<typeof alignmentSchema>
export const alignmentReviewBelow = 0.6

/** What an automatic alignment saw, kept beside it so that a person can judge it. */
export interface AlignmentEvidence {
  gain: number
  background: number
  /** Residual of the best fit that lies elsewhere, over the residual of the best fit (≥ 1); null when there is none. */
  secondBestRatio: number | null
  secondBestOffsetSeconds: number | null
  edges: number
  beat: boolean
  /** A sentence each: why the confidence is what it is. */
  reasons: string[]
}

/** Time missing in mid-clip although the timestamps run on, found by the light. */
export interface FrameLoss {
  /** First frame after the gap. */
  frame: number
  /** How many frames before it the gap could be as well: the light is level there. */
  uncertainFrames: number
  /** Negative: frames were doubled. */
  lostFrames: number
  lostSeconds: number
}

export const groupSchema = z.object({
  id: z.string().regex(/^[a-z0-9][a-z0-9-]{0,63}$/i, 'Use letters, digits and hyphens, at most 64.'),
  line: z.number().int(),
  frequencyHz: z.number(),
  repetition: z.number().int(),
  role: groupRoleSchema,
  lampPhaseDeg: z.number().nullable(),
  depth: z.number().nullable(),
  /** As the regime's; cut lists from before it was kept lack it. */
  distortion: z.number().nullable().optional(),
  firstFrame: z.number().int().min(0),
  frameCount: z.number().int().min(0),
  accepted: z.boolean(),
  flags: z.array(flagSchema),
})
/** Frames summed together: all of them lie wholly inside one regime. Lines and repetitions count from 1. */
export type Group = z.infer<typeof groupSchema>
