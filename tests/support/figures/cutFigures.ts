import { cutFrames } from '../../../jobs/signal/cut'
import { findRegimes } from '../../../jobs/signal/regimes'
import { wrapDegrees } from '../../../jobs/signal/sineFit'
import type { Group, Regime } from '../../../shared/measurement'
import { frameWindow, groupTruths, makeTimeline, type GroupTruth, type Scenario } from '../forward'
import { photodiode } from '../forward/record'
import { gaussianRandom } from '../forward/random'
import { drawSchedule } from './cutSchedules'

export interface CutFigures {
  schedules: number
  groups: number
  /** Frames in a group of another regime, line, repetition or role than they were lit by. */
  wrongFrames: number
  /** Frames used although the lamp changes during their exposure. */
  edgeFrames: number
  /** Groups that the truth holds (five frames and more) and the cut list lacks. */
  missingGroups: number
  /** Least share of a group's usable frames (wholly inside, with the guard) that is used. */
  leastUsedShare: number
  /** Over regimes of 1 s and more. */
  worstFrequencyHz: number
  /** In the regime's middle. */
  worstPhaseDeg: number
  /** About the record's first sample, as stated: with what the frequency's error adds. */
  worstPhaseAtZeroDeg: number
  /** Relative. */
  worstDepth: number
  secondsOfRecord: number
}

const guardSeconds = 0.001

function makeIllumination(scenario: Scenario): Float32Array {
  const timeline = makeTimeline(scenario)
  const { record } = scenario
  const normal = gaussianRandom(scenario.seed + 101)
  return Float32Array.from({ length: Math.round(record.durationSeconds * record.sampleRateHz) }, (_, i) => photodiode(timeline, i / record.sampleRateHz) + record.lampNoiseVolts * normal())
}

/** Regimes and cut list of one schedule, from its record and its true alignment, against what the forward model knows. */
export function cutSchedule(scenario: Scenario): { truths: GroupTruth[], groups: Group[], regimes: Regime[], figures: CutFigures } {
  const illumination = makeIllumination(scenario)
  const { record, camera, clock } = scenario
  const plan = scenario.seed % 2 ? scenario.lines.map(line => ({ frequencyHz: Math.round(line.frequencyHz) })) : []
  const { regimes } = findRegimes(illumination, record.sampleRateHz, { plannedFrequenciesHz: plan.map(line => line.frequencyHz) })
  const frameTimesSeconds = Float64Array.from({ length: camera.frameCount }, (_, k) => k * camera.frameRate.denominator / camera.frameRate.numerator)
  const { groups } = cutFrames({ regimes, alignment: clock, frameTimesSeconds, exposureSeconds: camera.exposureSeconds, guardSeconds, plan })
  const truths = groupTruths(scenario, guardSeconds)
  const figures = emptyFigures()
  figures.schedules = 1
  figures.secondsOfRecord = record.durationSeconds
  const found = new Map<GroupTruth, Group>()
  for (const group of groups) {
    figures.groups++
    const home = judgeFrames(scenario, group, truths, figures)
    if (home) found.set(home, group)
  }
  for (const truth of truths) judgeGroup(truth, found.get(truth), scenario, regimes, figures)
  return { truths, groups, regimes, figures }
}

function judgeFrames(scenario: Scenario, group: Group, truths: GroupTruth[], figures: CutFigures): GroupTruth | null {
  const end = group.firstFrame + group.frameCount
  const shared = (truth: GroupTruth) => Math.min(end, truth.firstFrame + truth.frameCount) - Math.max(group.firstFrame, truth.firstFrame)
  const home = truths.reduce<GroupTruth | null>((best, truth) => shared(truth) > Math.max(0, best ? shared(best) : 0) ? truth : best, null)
  const right = home && home.role === group.role && (home.line === null || home.role === 'dark' || (home.repetition === group.repetition && Math.abs(home.frequencyHz! - group.frequencyHz) < 0.1))
  for (let frame = group.firstFrame; frame < end; frame++) {
    const window = frameWindow(scenario, frame)
    const inside = home && window.startSeconds >= home.startSeconds && window.endSeconds <= home.endSeconds
    if (!right) figures.wrongFrames++
    else if (!inside) figures.edgeFrames++
  }
  return right ? home : null
}

function judgeGroup(truth: GroupTruth, group: Group | undefined, scenario: Scenario, regimes: Regime[], figures: CutFigures): void {
  const seconds = Math.min(truth.endSeconds, scenario.record.durationSeconds) - Math.max(truth.startSeconds, 0)
  if (!group) {
    if (truth.frameCount >= 5 && seconds >= (truth.role === 'dark' ? 0.2 : 0.45)) figures.missingGroups++
    return
  }
  if (truth.frameCount >= 10) figures.leastUsedShare = Math.min(figures.leastUsedShare, group.frameCount / truth.frameCount)
  if (truth.role !== 'phase' || seconds < 1) return
  const middle = (Math.max(truth.startSeconds, 0) + Math.min(truth.endSeconds, scenario.record.durationSeconds)) / 2
  const regime = regimes.find(({ startSeconds, endSeconds }) => startSeconds < middle && endSeconds > middle)!
  figures.worstFrequencyHz = Math.max(figures.worstFrequencyHz, Math.abs(regime.frequencyHz! - truth.frequencyHz!))
  const phaseError = regime.lampPhaseDeg! - truth.lampPhaseDeg!
  figures.worstPhaseDeg = Math.max(figures.worstPhaseDeg, Math.abs(wrapDegrees(phaseError + 360 * (regime.frequencyHz! - truth.frequencyHz!) * middle)))
  figures.worstPhaseAtZeroDeg = Math.max(figures.worstPhaseAtZeroDeg, Math.abs(wrapDegrees(phaseError)))
  figures.worstDepth = Math.max(figures.worstDepth, Math.abs(regime.depth! / truth.depth! - 1))
}

function emptyFigures(): CutFigures {
  return { schedules: 0, groups: 0, wrongFrames: 0, edgeFrames: 0, missingGroups: 0, leastUsedShare: 1, worstFrequencyHz: 0, worstPhaseDeg: 0, worstPhaseAtZeroDeg: 0, worstDepth: 0, secondsOfRecord: 0 }
}

const sums = ['schedules', 'groups', 'wrongFrames', 'edgeFrames', 'missingGroups', 'secondsOfRecord'] as const
const worsts = ['worstFrequencyHz', 'worstPhaseDeg', 'worstPhaseAtZeroDeg', 'worstDepth'] as const

/** The figures over so many seeded schedules of the independent forward model. */
export function cutFigures(schedules = 100, firstSeed = 1, onCase: (line: string) => void = () => {}): CutFigures {
  const total = emptyFigures()
  for (let seed = firstSeed; seed < firstSeed + schedules; seed++) {
    const scenario = drawSchedule(seed)
    const started = performance.now()
    const { figures } = cutSchedule(scenario)
    for (const key of sums) total[key] += figures[key]
    for (const key of worsts) total[key] = Math.max(total[key], figures[key])
    total.leastUsedShare = Math.min(total.leastUsedShare, figures.leastUsedShare)
    const { record, lamp, camera } = scenario
    onCase(`${seed} wrong ${figures.wrongFrames} edge ${figures.edgeFrames} missing ${figures.missingGroups} of ${figures.groups} used ${figures.leastUsedShare.toFixed(3)} f ${figures.worstFrequencyHz.toExponential(1)} ph ${figures.worstPhaseDeg.toFixed(3)} depth ${figures.worstDepth.toFixed(4)} | ${scenario.lines.map(line => line.frequencyHz.toFixed(2)).join(' ')} Hz at ${record.sampleRateHz}, depth ${lamp.regimes.find(regime => regime.depth)!.depth!.toFixed(2)}, noise ${record.lampNoiseVolts.toFixed(4)}, mains ${record.mainsVolts.toFixed(3)} at ${record.mainsHz}, level ${lamp.regimes.find(regime => regime.kind !== 'dark')!.levelVolts.toFixed(2)}, ${camera.frameRate.numerator}, ${record.durationSeconds.toFixed(1)} s, ${(performance.now() - started).toFixed(0)} ms`)
  }
  return total
}
