import type { AcquisitionState, JobState, PipelineStage, Stage, UploadState } from '#shared/states'

export interface JobFacts {
  stage: Stage
  state: JobState
  message: string | null
  progress: number
}

export interface StageFactsNow {
  stage: PipelineStage
  /** Its output is there and was made from what it would read now. */
  current: boolean
  job: JobFacts | null
}

export interface UploadFacts {
  kind: 'clip' | 'record'
  state: UploadState
  filename: string
  bytes: number
  receivedBytes: number
  message: string | null
}

export interface AcquisitionFacts {
  /** Newest first. */
  uploads: UploadFacts[]
  /** In the order of the pipeline. */
  stages: StageFactsNow[]
  /** The newest job of each upload that waits for its proof. */
  proofs: JobFacts[]
  /** Stages start without being asked. */
  startsByItself: boolean
  frameSetCount: number
}

export interface DerivedState {
  state: AcquisitionState
  /** What it waits for or what to do, in a sentence. */
  message: string
}

export const stageWork: Record<Stage, string> = {
  verify: 'Proving that every byte arrived', inspect: 'Reading the clip', meter: 'Measuring the light of the frames', record: 'Reading the record',
  align: 'Tying camera time to record time', cut: 'Cutting frames into groups', sum: 'Summing the groups', check: 'Checking and solving',
}

/** What an acquisition needs next. What a person has to do comes before what goes on by itself. */
export function deriveAcquisitionState(facts: AcquisitionFacts): DerivedState {
  const jobs = [...facts.proofs, ...facts.stages.filter(stage => !stage.current).flatMap(stage => stage.job ?? [])]
  const withState = (...states: JobState[]) => jobs.find(job => states.includes(job.state))
  return endedBadly(withState('failed'), 'failed', 'failed. Open it for the reason, then process it again.')
    ?? endedBadly(withState('needs review'), 'needs review', 'needs a decision. Open it and look.')
    ?? missingFiles(facts)
    ?? endedBadly(withState('on hold'), 'on hold', 'is on hold. Resume it in the queue.')
    ?? underWay(jobs)
    ?? rest(facts, withState('cancelled'))
}

function endedBadly(job: JobFacts | undefined, state: AcquisitionState, otherwise: string): DerivedState | null {
  return job ? { state, message: job.message ?? `The ${job.stage} stage ${otherwise}` } : null
}

function missingFiles({ uploads }: AcquisitionFacts): DerivedState | null {
  const newest = (kind: UploadFacts['kind'], ...states: UploadState[]) => uploads.find(upload => upload.kind === kind && states.includes(upload.state))
  const missing = (['clip', 'record'] as const).filter(kind => !newest(kind, 'stored', 'verifying'))
  if (!missing.length) return null
  const arriving = missing.flatMap(kind => newest(kind, 'receiving') ?? [])
  if (arriving.length) return { state: 'uploading', message: `${arriving.map(upload => `${upload.filename} is ${share(upload)} here`).join(', ')}. Go on with the upload if it has stopped.` }
  const refused = missing.flatMap(kind => newest(kind, 'refused') ?? [])[0]
  if (refused) return { state: needs(missing[0]!), message: `${refused.filename} was refused. ${refused.message ?? 'Upload it again.'}` }
  if (missing.length === 2) return { state: 'registered', message: 'Nothing has been uploaded yet. Upload the clip and the record.' }
  return { state: needs(missing[0]!), message: missing[0] === 'clip' ? 'The clip is missing. Upload it.' : 'The record is missing. Upload the DAQ record.' }
}

const needs = (kind: UploadFacts['kind']) => `needs ${kind}` as const

const share = ({ receivedBytes, bytes }: UploadFacts) => `${Math.floor(100 * receivedBytes / Math.max(1, bytes))} %`

function underWay(jobs: JobFacts[]): DerivedState | null {
  const running = jobs.find(job => job.state === 'running')
  if (running) return { state: 'processing', message: `${stageWork[running.stage]}: ${Math.floor(100 * running.progress)} % done.` }
  const waiting = jobs.find(job => job.state === 'waiting')
  return waiting ? { state: 'processing', message: `${stageWork[waiting.stage]} waits for a free runner.` } : null
}

function rest({ stages, startsByItself, frameSetCount }: AcquisitionFacts, cancelled: JobFacts | undefined): DerivedState {
  if (stages.every(stage => stage.current)) return { state: 'ready', message: readyMessage(frameSetCount) }
  if (cancelled) return { state: 'stopped', message: `The ${cancelled.stage} stage was cancelled. Retry it, or process the acquisition again.` }
  if (!startsByItself) return { state: 'stopped', message: 'Clip and record are here. Start the processing when the settings are right.' }
  return { state: 'stopped', message: 'Not everything is up to date. Process it to go on.' }
}

function readyMessage(frameSetCount: number): string {
  if (!frameSetCount) return 'Everything has run, but no line gave a frame set. Look at the cut list.'
  return frameSetCount === 1 ? 'Its frame set is ready.' : `Its ${frameSetCount} frame sets are ready.`
}
