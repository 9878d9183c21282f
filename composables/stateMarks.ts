/** Shape and colour of every state, the same on every page. Words for people stand beside it, never colour alone. */
import type { AcquisitionState, FrameSetState, JobState, UploadState } from '#shared/states'

export type MarkShape = 'bar' | 'square' | 'triangle' | 'open triangle' | 'cross' | 'pause' | 'tick' | 'stroke' | 'arrow' | 'half' | 'dot' | 'flag'
export type MarkTone = 'accent' | 'quiet' | 'plain' | 'warn' | 'bad' | 'ok'
export interface StateMarkSpec { shape: MarkShape, tone: MarkTone }
export type AnyState = JobState | UploadState | AcquisitionState | FrameSetState | 'not yet' | 'paused' | 'queued' | 'sending' | 'stopped' | 'waiting'

export const stateMarks: Record<AnyState, StateMarkSpec> = {
  'waiting': { shape: 'square', tone: 'quiet' },
  'running': { shape: 'bar', tone: 'accent' },
  'done': { shape: 'tick', tone: 'ok' },
  'needs review': { shape: 'triangle', tone: 'warn' },
  'failed': { shape: 'cross', tone: 'bad' },
  'cancelled': { shape: 'stroke', tone: 'quiet' },
  'on hold': { shape: 'pause', tone: 'plain' },
  'not yet': { shape: 'dot', tone: 'quiet' },

  'receiving': { shape: 'arrow', tone: 'accent' },
  'verifying': { shape: 'half', tone: 'accent' },
  'stored': { shape: 'tick', tone: 'ok' },
  'refused': { shape: 'cross', tone: 'bad' },
  'removed': { shape: 'stroke', tone: 'quiet' },
  'queued': { shape: 'square', tone: 'quiet' },
  'sending': { shape: 'arrow', tone: 'accent' },
  'paused': { shape: 'pause', tone: 'plain' },
  'stopped': { shape: 'stroke', tone: 'quiet' },

  'registered': { shape: 'square', tone: 'quiet' },
  'uploading': { shape: 'arrow', tone: 'accent' },
  'needs clip': { shape: 'open triangle', tone: 'warn' },
  'needs record': { shape: 'open triangle', tone: 'warn' },
  'processing': { shape: 'bar', tone: 'accent' },
  'ready': { shape: 'tick', tone: 'ok' },

  'draft': { shape: 'square', tone: 'quiet' },
  'released': { shape: 'flag', tone: 'ok' },
}
