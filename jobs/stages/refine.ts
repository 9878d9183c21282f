import { alignmentReviewBelow, type Group, type PlanLine } from '../../shared/measurement'
import { alignNear, type AlignInput, type AlignResult } from '../signal/align'
import { cutFrames } from '../signal/cut'
import { correctFrameTimes } from '../signal/frameLoss'
import type { RecordRegimes } from './record'
import { uncertainFrames } from './cut'

export interface RefineInput extends AlignInput {
  previous: { offsetSeconds: number, driftPpm: number }
  regimes: RecordRegimes['regimes']
  guardSeconds: number
  plan: PlanLine[]
  groups: Group[]
  /** A person's groups are kept as they are. */
  keepGroups: boolean
}

export interface Refined {
  alignment: AlignResult
  sure: boolean
  frameTimesSeconds: Float64Array
  groups: Group[]
}

/** The alignment made anew with the light of every frame, and the cut that follows from it with as few frames changing sides as possible. */
export function refineWithAllLight(input: RefineInput): Refined {
  const alignment = alignNear(input, input.previous)
  const frameTimesSeconds = correctFrameTimes(input.frameTimesSeconds, alignment.losses)
  const sure = alignment.confidence >= alignmentReviewBelow
  const { regimes, exposureSeconds, guardSeconds, plan, groups } = input
  return {
    alignment, sure, frameTimesSeconds,
    groups: input.keepGroups || !sure ? groups : cutFrames({ regimes, alignment, frameTimesSeconds, exposureSeconds, guardSeconds, plan, keep: groups, excluded: uncertainFrames(alignment.losses) }).groups,
  }
}
