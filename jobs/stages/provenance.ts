import { version } from '../../package.json'
import type { ClipFacts, FrameLoss, LampPatch } from '../../shared/measurement'
import type { ChannelMapping } from '../../shared/records'
import { stageVersions, type Situation } from '../queue/inputs'
import { exposureOf, factsOf } from './inputs'

/** Everything besides the files themselves that decides a frame set. No times and no ids of jobs: a second run gives the same bytes. */
export interface Provenance {
  program: { version: string, stages: Record<string, number> }
  inputs: { kind: 'clip' | 'record', filename: string, bytes: number, sha256: string }[]
  settings: { transfer: string, range: string, frameExposureSeconds: number, guardSeconds: number, millimetresPerPixel: number | null, lampPatch: LampPatch | null, plan: unknown, channels: ChannelMapping | null }
  clip: ClipFacts
  record: { sampleRateHz: number, darkLevel: number | null }
  alignment: { version: number, offsetSeconds: number, driftPpm: number, losses: FrameLoss[] }
  cutListVersion: number
}

export function provenanceOf(situation: Situation): Provenance {
  const { acquisition } = situation
  const inspect = factsOf(situation, 'inspect')
  const record = factsOf(situation, 'record')
  const { alignment, cutListVersion } = factsOf(situation, 'sum')
  const input = (kind: 'clip' | 'record', { filename, bytes, sha256 }: typeof inspect.source) => ({ kind, filename, bytes, sha256 })
  return {
    program: { version, stages: stageVersions },
    inputs: [input('clip', inspect.source), input('record', record.source)],
    settings: {
      transfer: acquisition.transfer, range: acquisition.range, frameExposureSeconds: exposureOf(situation), guardSeconds: acquisition.guardSeconds,
      millimetresPerPixel: acquisition.millimetresPerPixel, lampPatch: acquisition.lampPatch, plan: acquisition.plan, channels: acquisition.channels,
    },
    clip: inspect.clip,
    record: { sampleRateHz: record.record.sampleRateHz, darkLevel: record.darkLevel },
    alignment,
    cutListVersion,
  }
}
