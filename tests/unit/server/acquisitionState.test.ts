import { describe, expect, it } from 'vitest'
import { pipelineStages, type JobState, type PipelineStage } from '../../../shared/states'
import { deriveAcquisitionState, type AcquisitionFacts, type UploadFacts } from '../../../server/utils/acquisitionState'

const upload = (kind: UploadFacts['kind'], state: UploadFacts['state'], changes: Partial<UploadFacts> = {}): UploadFacts => ({ kind, state, filename: `take.${kind}`, bytes: 1000, receivedBytes: 430, message: null, ...changes })
const both = [upload('clip', 'stored'), upload('record', 'stored')]

interface StageChanges { current?: boolean, state?: JobState, message?: string, progress?: number }
function facts(uploads: UploadFacts[], stages: Partial<Record<PipelineStage, StageChanges>> = {}, changes: Partial<AcquisitionFacts> = {}): AcquisitionFacts {
  return {
    uploads, proofs: [], startsByItself: true, frameSetCount: 0, ...changes,
    stages: pipelineStages.map((stage) => {
      const { current = false, state, message = null, progress = 0 } = stages[stage] ?? {}
      return { stage, current, job: state ? { stage, state, message, progress } : null }
    }),
  }
}
const allCurrent = Object.fromEntries(pipelineStages.map(stage => [stage, { current: true, state: 'done' as const }]))
const stateOf = (...args: Parameters<typeof facts>) => deriveAcquisitionState(facts(...args)).state
const messageOf = (...args: Parameters<typeof facts>) => deriveAcquisitionState(facts(...args)).message

describe('what an acquisition needs next', () => {
  it('asks for what is missing', () => {
    expect(stateOf([])).toBe('registered')
    expect(stateOf([upload('record', 'stored')])).toBe('needs clip')
    expect(stateOf([upload('clip', 'stored')])).toBe('needs record')
    expect(stateOf([upload('clip', 'verifying')])).toBe('needs record')
  })

  it('tells how far an upload is', () => {
    expect(stateOf([upload('clip', 'receiving')])).toBe('uploading')
    expect(messageOf([upload('clip', 'receiving'), upload('record', 'stored')])).toMatch(/^take\.clip is 43 % here/)
  })

  it('does not wait for a second upload of a file that is stored already', () => {
    expect(stateOf([upload('clip', 'receiving'), ...both], allCurrent)).toBe('ready')
  })

  it('passes on why a file was refused', () => {
    const derived = deriveAcquisitionState(facts([upload('record', 'refused', { message: 'The server holds 10 of 20 bytes. Upload the file again.' }), upload('clip', 'stored')]))
    expect(derived).toEqual({ state: 'needs record', message: 'take.record was refused. The server holds 10 of 20 bytes. Upload the file again.' })
  })

  it('is being processed while jobs run or wait', () => {
    expect(messageOf(both, { inspect: { current: true, state: 'done' }, meter: { state: 'running', progress: 0.4 }, record: { state: 'waiting' } })).toBe('Measuring the light of the frames: 40 % done.')
    expect(messageOf(both, { inspect: { state: 'waiting' } })).toBe('Reading the clip waits for a free runner.')
    expect(stateOf([upload('clip', 'verifying'), upload('record', 'verifying')], {}, { proofs: [{ stage: 'verify', state: 'running', message: null, progress: 0.1 }] })).toBe('processing')
  })

  it('puts what a person must do before what goes on by itself', () => {
    const running = { state: 'running' as const }
    expect(stateOf(both, { meter: running, record: { state: 'failed', message: 'No column is the illumination.' } })).toBe('failed')
    expect(stateOf(both, { meter: running, record: { state: 'needs review' } })).toBe('needs review')
    expect(stateOf([upload('clip', 'stored')], { inspect: running })).toBe('needs record')
    expect(messageOf(both, { align: { state: 'needs review', message: 'Not sure: offset 1.2 s.' } })).toBe('Not sure: offset 1.2 s.')
  })

  it('forgets how a job ended once its output counts', () => {
    expect(stateOf(both, { ...allCurrent, align: { current: true, state: 'needs review' } })).toBe('ready')
    expect(stateOf(both, { ...allCurrent, sum: { current: true, state: 'failed' } })).toBe('ready')
  })

  it('is on hold with its job, and stopped when a job was cancelled or nobody has started it', () => {
    expect(stateOf(both, { meter: { state: 'on hold' } })).toBe('on hold')
    expect(stateOf(both, { meter: { state: 'cancelled' } })).toBe('stopped')
    expect(stateOf(both, {}, { startsByItself: false })).toBe('stopped')
    expect(messageOf(both, {}, { startsByItself: false })).toMatch(/Start the processing/)
  })

  it('is ready when every stage counts', () => {
    expect(deriveAcquisitionState(facts(both, allCurrent, { frameSetCount: 2 }))).toEqual({ state: 'ready', message: 'Its 2 frame sets are ready.' })
    expect(messageOf(both, allCurrent)).toMatch(/no line gave a frame set/)
  })

  it.each(['failed', 'needs review', 'on hold', 'cancelled', 'running', 'waiting'] as const)('says what to do in a sentence for a job that is %s', (state) => {
    expect(messageOf(both, { meter: { state } })).toMatch(/^[A-Z].*\.$/)
  })
})
