/** Every state machine of the product, written down once: the server checks transitions, the badges draw the states. */

export const stages = ['verify', 'inspect', 'meter', 'record', 'align', 'cut', 'sum', 'check'] as const
export type Stage = (typeof stages)[number]

/** Stages that make an acquisition's results, in order, and the stages whose outputs each reads. */
export const pipeline = {
  inspect: [],
  meter: ['inspect'],
  record: [],
  align: ['meter', 'record'],
  cut: ['align'],
  sum: ['cut'],
  check: ['sum'],
} as const satisfies Record<Exclude<Stage, 'verify'>, readonly Stage[]>
export type PipelineStage = keyof typeof pipeline
export const pipelineStages = Object.keys(pipeline) as PipelineStage[]

export const jobStates = ['waiting', 'running', 'done', 'needs review', 'failed', 'cancelled', 'on hold'] as const
export type JobState = (typeof jobStates)[number]

export const jobTransitions: Record<JobState, readonly JobState[]> = {
  'waiting': ['running', 'cancelled', 'on hold'],
  'running': ['done', 'needs review', 'failed', 'cancelled', 'on hold', 'waiting'],
  'done': [],
  'needs review': ['done', 'waiting', 'cancelled'],
  'failed': ['waiting'],
  'cancelled': ['waiting'],
  'on hold': ['waiting', 'cancelled'],
}
export const activeJobStates = ['waiting', 'running', 'on hold'] as const satisfies readonly JobState[]

export const jobActions = {
  cancel: ['waiting', 'running', 'on hold', 'needs review'],
  retry: ['failed', 'cancelled', 'needs review'],
  hold: ['waiting', 'running'],
  resume: ['on hold'],
} as const satisfies Record<string, readonly JobState[]>
export type JobAction = keyof typeof jobActions

/** receiving → verifying (all bytes here, hash not yet proven) → stored; or refused, or removed by a person. */
export const uploadStates = ['receiving', 'verifying', 'stored', 'refused', 'removed'] as const
export type UploadState = (typeof uploadStates)[number]

/**
 * What an acquisition needs next, derived from its uploads and jobs (server/utils/acquisitionState.ts), never set by hand.
 */
export const acquisitionStates = ['registered', 'uploading', 'needs clip', 'needs record', 'processing', 'needs review', 'failed', 'on hold', 'ready', 'stopped'] as const
export type AcquisitionState = (typeof acquisitionStates)[number]

export const frameSetStates = ['draft', 'released'] as const
export type FrameSetState = (typeof frameSetStates)[number]
