import { lampIntegral, lampRegimes, type LampRegime } from './lamp'
import type { Scenario } from './scenario'

export interface Window { startSeconds: number, endSeconds: number }
/** A stretch of record time in which regime, line and camera pose stay the same. Lines and poses count from 0 here. */
export interface Stretch extends Window { regime: LampRegime, line: number, pose: number }

export interface Timeline {
  scenario: Scenario
  regimes: LampRegime[]
  /** Poses of the camera: the first is (0, 0), one more for each bump. */
  poses: { fromSeconds: number, dxPixels: number, dyPixels: number }[]
}

export function makeTimeline(scenario: Scenario): Timeline {
  const bumps = [...scenario.camera.bumps].sort((a, b) => a.atClipSeconds - b.atClipSeconds)
  return {
    scenario,
    regimes: lampRegimes(scenario.lamp.regimes, scenario.lamp.settlingSeconds),
    poses: [{ fromSeconds: -Infinity, dxPixels: 0, dyPixels: 0 }, ...bumps.map(({ atClipSeconds, ...shift }) => ({ fromSeconds: toRecordSeconds(scenario, atClipSeconds), ...shift }))],
  }
}

export const toRecordSeconds = ({ clock }: Scenario, clipSeconds: number): number => clock.offsetSeconds + (1 + clock.driftPpm * 1e-6) * clipSeconds

/** When the shutter of a frame is open, in record time. */
export function frameWindow(scenario: Scenario, frame: number): Window {
  const start = frame * scenario.camera.frameRate.denominator / scenario.camera.frameRate.numerator
  return { startSeconds: toRecordSeconds(scenario, start), endSeconds: toRecordSeconds(scenario, start + scenario.camera.exposureSeconds) }
}

/** Index of the last entry that starts at or before `seconds`. */
function lastBefore(starts: ArrayLike<number>, seconds: number): number {
  let low = 0
  let high = starts.length - 1
  while (low < high) {
    const middle = (low + high + 1) >> 1
    if (starts[middle]! <= seconds) low = middle
    else high = middle - 1
  }
  return low
}

const startsOf = new WeakMap<Timeline, Float64Array>()
export function regimeIndexAt(timeline: Timeline, recordSeconds: number): number {
  let starts = startsOf.get(timeline)
  if (!starts) startsOf.set(timeline, starts = Float64Array.from(timeline.regimes, regime => regime.startSeconds))
  return lastBefore(starts, recordSeconds)
}

/** The line whose excitation runs: that of the regime, else the one before, else the first to come. Counts from 0. */
export function excitedLine({ regimes }: Timeline, regimeIndex: number): number {
  for (let i = regimeIndex; i >= 0; i--) if (regimes[i]!.spec.line !== null) return regimes[i]!.spec.line! - 1
  return (regimes.find(regime => regime.spec.line !== null)?.spec.line ?? 1) - 1
}

/** A window of record time, cut wherever lamp, line or camera change. */
export function stretchesOf(timeline: Timeline, window: Window): Stretch[] {
  const { regimes, poses } = timeline
  const stretches: Stretch[] = []
  let now = window.startSeconds
  while (now < window.endSeconds) {
    const index = regimeIndexAt(timeline, now)
    let pose = poses.length - 1
    while (poses[pose]!.fromSeconds > now) pose--
    const endSeconds = Math.min(window.endSeconds, regimes[index]!.endSeconds, poses[pose + 1]?.fromSeconds ?? Infinity)
    stretches.push({ startSeconds: now, endSeconds, regime: regimes[index]!, line: excitedLine(timeline, index), pose })
    now = endSeconds
  }
  return stretches
}

export interface Integrals { a: number, c: number, s: number }

/** (1/T)∫L dt, (1/T)∫L cos ωt dt and (1/T)∫L sin ωt dt over a frame's exposure, in V; ambient light is not in it. */
export function frameIntegrals(timeline: Timeline, frame: number, frequencyHz: number): Integrals {
  const window = frameWindow(timeline.scenario, frame)
  const exposure = window.endSeconds - window.startSeconds
  const sum = { a: 0, c: 0, s: 0 }
  for (const { regime, startSeconds, endSeconds } of stretchesOf(timeline, window)) {
    const harmonic = lampIntegral(regime, startSeconds, endSeconds, 2 * Math.PI * frequencyHz)
    sum.a += lampIntegral(regime, startSeconds, endSeconds, 0)[0] / exposure
    sum.c += harmonic[0] / exposure
    sum.s += harmonic[1] / exposure
  }
  return sum
}

/** The same, summed over the frames of a group. */
export function groupIntegrals(timeline: Timeline, firstFrame: number, frameCount: number, frequencyHz: number): Integrals {
  const sum = { a: 0, c: 0, s: 0 }
  for (let frame = firstFrame; frame < firstFrame + frameCount; frame++) {
    const one = frameIntegrals(timeline, frame, frequencyHz)
    sum.a += one.a
    sum.c += one.c
    sum.s += one.s
  }
  return sum
}
