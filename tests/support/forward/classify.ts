import type { Scenario } from './scenario'
import { frameWindow, groupIntegrals, makeTimeline, type Integrals, type Timeline } from './timeline'

/** `edge`: touches a regime's edge or its guard. `outside`: not wholly inside the record. */
export type FrameClass = 'dark' | 'reference' | 'phase' | 'edge' | 'outside'
export interface FrameTruth { frame: number, kind: FrameClass, regime: number | null }

export interface CountRange { min: number, max: number }

export interface GroupTruth {
  regime: number
  role: 'dark' | 'reference' | 'phase'
  line: number | null
  repetition: number | null
  frequencyHz: number | null
  lampPhaseDeg: number | null
  depth: number | null
  startSeconds: number
  endSeconds: number
  /** Every frame that lies wholly inside the regime and its guard. */
  firstFrame: number
  frameCount: number
  /**
   * What a cut may choose: no frame outside `firstFrame.min … lastFrame.max`, at least `frameCount.min` of them (nine
   * tenths of those inside). Frames within `slackSeconds` of the guard may be taken or left.
   */
  allowed: { firstFrame: CountRange, lastFrame: CountRange, frameCount: CountRange }
  /** A, C, S summed over `firstFrame`, `frameCount`, in V; of a dark or reference at the frequency of its line. */
  integrals: Integrals
}

/** The record's span, inside of which a regime can be seen at all. */
const seen = (timeline: Timeline, index: number) => {
  const { startSeconds, endSeconds } = timeline.regimes[index]!
  const recordEnd = timeline.scenario.record.durationSeconds
  return { start: Math.max(0, startSeconds), end: Math.min(recordEnd, endSeconds), cutAtStart: startSeconds < 0, cutAtEnd: endSeconds > recordEnd }
}

/** Which regime, if any, wholly contains each frame's exposure with `guardSeconds` to spare. */
export function classifyFrames(scenario: Scenario, guardSeconds = 0.001, timeline = makeTimeline(scenario)): FrameTruth[] {
  return Array.from({ length: scenario.camera.frameCount }, (_, frame) => {
    const window = frameWindow(scenario, frame)
    if (window.startSeconds < 0 || window.endSeconds > scenario.record.durationSeconds) return { frame, kind: 'outside', regime: null }
    const regime = timeline.regimes.findIndex((_, index) => {
      const { start, end } = seen(timeline, index)
      return window.startSeconds >= start + guardSeconds && window.endSeconds <= end - guardSeconds
    })
    return regime < 0 ? { frame, kind: 'edge', regime: null } : { frame, kind: timeline.regimes[regime]!.spec.kind, regime }
  })
}

/** First and last frame whose exposure lies inside a regime with these guards; null when there is none. */
function framesInside(timeline: Timeline, index: number, guardAtStart: number, guardAtEnd: number): { first: number, last: number } | null {
  const { start, end } = seen(timeline, index)
  let first = -1
  let last = -1
  for (let frame = 0; frame < timeline.scenario.camera.frameCount; frame++) {
    const window = frameWindow(timeline.scenario, frame)
    if (window.startSeconds < start + guardAtStart || window.endSeconds > end - guardAtEnd) continue
    if (first < 0) first = frame
    last = frame
  }
  return first < 0 ? null : { first, last }
}

/** All groups that the clip and the record hold together, in order of time. */
export function groupTruths(scenario: Scenario, guardSeconds = 0.001, slackSeconds = 0.0005, timeline = makeTimeline(scenario)): GroupTruth[] {
  return timeline.regimes.flatMap((regime, index) => {
    const { spec } = regime
    const inside = framesInside(timeline, index, guardSeconds, guardSeconds)
    if (!inside) return []
    const { cutAtStart, cutAtEnd } = seen(timeline, index)
    const widest = framesInside(timeline, index, cutAtStart ? 0 : guardSeconds - slackSeconds, cutAtEnd ? 0 : guardSeconds - slackSeconds)!
    const strict = framesInside(timeline, index, guardSeconds + slackSeconds, guardSeconds + slackSeconds)
    const fewest = strict ? Math.ceil(0.9 * (strict.last - strict.first + 1)) : 0
    const frameCount = inside.last - inside.first + 1
    const frequencyHz = spec.frequencyHz ?? (spec.line === null ? null : scenario.lines[spec.line - 1]!.frequencyHz)
    return [{
      regime: index, role: spec.kind, line: spec.line, repetition: spec.repetition, frequencyHz,
      lampPhaseDeg: spec.kind === 'phase' ? spec.phaseDeg ?? 0 : null, depth: spec.kind === 'phase' ? spec.depth! : null,
      startSeconds: regime.startSeconds, endSeconds: regime.endSeconds,
      firstFrame: inside.first, frameCount,
      allowed: {
        firstFrame: { min: widest.first, max: widest.last - fewest + 1 },
        lastFrame: { min: widest.first + fewest - 1, max: widest.last },
        frameCount: { min: fewest, max: widest.last - widest.first + 1 },
      },
      integrals: groupIntegrals(timeline, inside.first, frameCount, frequencyHz ?? 0),
    }]
  })
}

/** Whether a cut's choice of frames for a group is one that the truth allows. */
export function groupFits(truth: GroupTruth, firstFrame: number, frameCount: number): boolean {
  const lastFrame = firstFrame + frameCount - 1
  return firstFrame >= truth.allowed.firstFrame.min && lastFrame <= truth.allowed.lastFrame.max && frameCount >= truth.allowed.frameCount.min
}
