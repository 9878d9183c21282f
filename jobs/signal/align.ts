import type { Alignment, AlignmentEvidence } from '../../shared/measurement'
import { coarseCandidates } from './alignCoarse'
import { judgeAlignment } from './alignConfidence'
import { searchGrid } from './alignGrid'
import { polish, type Polished } from './alignPolish'
import { badness, median, offsetOf, type AlignProblem, type AlignSolution } from './alignProblem'
import { beatAmplitude, lampTones } from './lampTones'
import { createLightIntegrals, predictFrameLight } from './lightPrediction'

/** Clip or record too short or without light to be aligned. */
export class AlignError extends Error {
  override name = 'AlignError'
}

export interface AlignInput {
  /** Linear mean light of each frame, any unit; NaN for a frame without one. */
  frameLight: Float64Array
  /** Clip time of each frame's start of exposure, rising, first = 0. */
  frameTimesSeconds: Float64Array
  exposureSeconds: number
  illumination: Float32Array
  sampleRateHz: number
  darkLevel: number | null
  /** Largest clock difference searched, default 200 ppm. */
  maxDriftPpm?: number
}

export interface AlignResult extends Alignment {
  evidence: AlignmentEvidence
  /** gain · mean lamp signal + background for every frame, in the unit of `frameLight`; NaN outside of the record. */
  predicted: Float64Array
}

const mostCandidates = 12
/** Longer clips are aligned on a stretch of this length first, which is then doubled up to the whole. */
const firstSpanSeconds = 60

function pose(input: AlignInput): AlignProblem {
  const { frameLight, frameTimesSeconds, illumination, sampleRateHz } = input
  if (frameLight.length !== frameTimesSeconds.length) throw new AlignError('Frame light and frame times differ in length; meter the clip again.')
  const kept: number[] = []
  for (let k = 0; k < frameLight.length; k++) if (Number.isFinite(frameLight[k])) kept.push(k)
  if (kept.length < 12) throw new AlignError(`A clip of ${kept.length} measured frames is too short to be aligned; set offset and drift by hand.`)
  if (illumination.length < 64) throw new AlignError('The illumination channel is too short to be aligned; check the record.')
  const light = Float64Array.from(kept, k => frameLight[k])
  const times = Float64Array.from(kept, k => frameTimesSeconds[k])
  const mean = light.reduce((sum, value) => sum + value, 0) / light.length
  return {
    light, times,
    exposureSeconds: input.exposureSeconds,
    frameSeconds: median(times.slice(1).map((time, k) => time - times[k])),
    integrals: createLightIntegrals(illumination, sampleRateHz, input.darkLevel),
    recordSeconds: (illumination.length - 1) / sampleRateHz,
    tones: lampTones(illumination, sampleRateHz),
    maxDriftPpm: input.maxDriftPpm ?? 200,
    lightVariance: light.reduce((sum, value) => sum + (value - mean) ** 2, 0) / light.length,
  }
}

/** Frames of a candidate that the record covers. */
function coveredRange(problem: AlignProblem, offsetSeconds: number): { fromFrame: number, toFrame: number } {
  const { times, recordSeconds, exposureSeconds } = problem
  let fromFrame = 0
  while (fromFrame < times.length - 1 && times[fromFrame] + offsetSeconds < 0) fromFrame++
  let toFrame = times.length
  while (toFrame > fromFrame + 1 && times[toFrame - 1] + offsetSeconds + exposureSeconds > recordSeconds) toFrame--
  return { fromFrame, toFrame }
}

/** The stretch of at most `seconds` in the range whose light varies most. */
function liveliestSpan(problem: AlignProblem, range: { fromFrame: number, toFrame: number }, seconds: number) {
  const { times, light } = problem
  if (times[range.toFrame - 1] - times[range.fromFrame] <= seconds) return range
  let best = range
  let most = -1
  for (let fromFrame = range.fromFrame; fromFrame < range.toFrame; fromFrame += Math.max(1, Math.floor(seconds / problem.frameSeconds / 4))) {
    let toFrame = fromFrame
    let steps = 0
    while (toFrame < range.toFrame && times[toFrame] - times[fromFrame] <= seconds) {
      if (toFrame > fromFrame) steps += Math.abs(light[toFrame] - light[toFrame - 1])
      toFrame++
    }
    if (steps > most) {
      most = steps
      best = { fromFrame, toFrame }
    }
    if (toFrame >= range.toFrame) break
  }
  return best
}

/** Finest step that keeps an eighth of the fastest beating tone's period. */
function gridStep(problem: AlignProblem): number {
  const fastest = Math.max(0, ...problem.tones.filter(tone => beatAmplitude(tone, problem.exposureSeconds) > 0.001).map(tone => tone.frequencyHz))
  return Math.max(problem.frameSeconds / 400, Math.min(problem.frameSeconds / 20, 1 / (10 * Math.max(fastest, 1))))
}

/** Grid minima of one coarse candidate on its first stretch. */
function expand(problem: AlignProblem, candidate: { offsetSeconds: number, driftPpm: number, stepSeconds: number }, step: number) {
  const covered = coveredRange(problem, candidate.offsetSeconds)
  const range = liveliestSpan(problem, covered, firstSpanSeconds)
  const pivotSeconds = (problem.times[range.fromFrame] + problem.times[range.toFrame - 1]) / 2
  let middleSeconds = candidate.offsetSeconds + (1 + candidate.driftPpm * 1e-6) * pivotSeconds
  const quarter = problem.frameSeconds / 4
  if (candidate.stepSeconds > quarter) {
    const rough = searchGrid(problem, { ...range, middleSeconds, pivotSeconds, halfRangeSeconds: 2 * candidate.stepSeconds, stepSeconds: quarter, driftPpm: 0, halfRangePpm: 0 }, 1)
    if (rough.length) middleSeconds = rough[0].middleSeconds
  }
  const halfRangeSeconds = Math.max(problem.frameSeconds * 0.6, 2 * Math.min(candidate.stepSeconds, quarter))
  const area = { ...range, middleSeconds, pivotSeconds, halfRangeSeconds, stepSeconds: step, driftPpm: 0, halfRangePpm: problem.maxDriftPpm }
  return searchGrid(problem, area, 6).map(solution => ({ solution, range }))
}

/** Polish on the first stretch, then on stretches twice as long, up to all covered frames. */
function settle(problem: AlignProblem, start: AlignSolution, range: { fromFrame: number, toFrame: number }): Polished {
  let polished = polish(problem, start, range)
  let span = range
  for (;;) {
    const covered = coveredRange(problem, offsetOf(polished))
    if (span.fromFrame <= covered.fromFrame && span.toFrame >= covered.toFrame) return polished
    const more = Math.ceil((span.toFrame - span.fromFrame) / 2)
    const next = { fromFrame: Math.max(covered.fromFrame, span.fromFrame - more), toFrame: Math.min(covered.toFrame, span.toFrame + more) }
    if (next.toFrame - next.fromFrame <= span.toFrame - span.fromFrame) return polished
    const pivotSeconds = (problem.times[next.fromFrame] + problem.times[next.toFrame - 1]) / 2
    const middleSeconds = polished.middleSeconds + (1 + polished.driftPpm * 1e-6) * (pivotSeconds - polished.pivotSeconds)
    polished = polish(problem, { ...polished, middleSeconds, pivotSeconds }, next)
    span = next
  }
}

/** How far apart two solutions are: the larger of their distances at the clip's two ends, seconds. */
function distance(problem: AlignProblem, a: AlignSolution, b: AlignSolution): number {
  const last = problem.times[problem.times.length - 1]
  const startGap = offsetOf(a) - offsetOf(b)
  const endGap = startGap + (a.driftPpm - b.driftPpm) * 1e-6 * last
  return Math.max(Math.abs(startGap), Math.abs(endGap))
}

function solve(problem: AlignProblem): { best: Polished, second: Polished | null, noiseVariance: number } {
  const step = gridStep(problem)
  const candidates = coarseCandidates(problem, mostCandidates)
  const expanded = candidates.flatMap(candidate => expand(problem, candidate, step))
  if (!expanded.length) throw new AlignError('Clip and record do not overlap enough to be aligned; check that they belong together, or set offset and drift by hand.')
  const floor = (0.01 ** 2) * Math.max(problem.lightVariance, Number.MIN_VALUE)
  const noiseOf = (solutions: AlignSolution[]) => Math.max(floor, Math.min(...solutions.map(solution => solution.squares / solution.frames)))
  const gridNoise = noiseOf(expanded.map(entry => entry.solution))
  expanded.sort((a, b) => badness(problem, a.solution, gridNoise) - badness(problem, b.solution, gridNoise))
  const polished = expanded.slice(0, 16).map(entry => settle(problem, entry.solution, entry.range))
  const noiseVariance = noiseOf(polished)
  polished.sort((a, b) => badness(problem, a, noiseVariance) - badness(problem, b, noiseVariance))
  const fastest = Math.max(1, ...problem.tones.map(tone => tone.frequencyHz))
  const elsewhere = Math.min(0.3 * problem.frameSeconds, Math.max(0.02 * problem.frameSeconds, 0.5 / fastest))
  const best = polished[0]
  return { best, second: polished.find(other => distance(problem, best, other) > elsewhere) ?? null, noiseVariance }
}

/**
 * Tie clip time to record time by the light: every frame's mean is predicted as gain · (1/T_e)∫ L dt + background and
 * offset, drift, gain and background are fitted to all frames that the record covers.
 *
 * Full-range coarse search by normalised cross-correlation, a joint grid over offset and drift around the best
 * candidates, damped Gauss–Newton at the end. Offsets may be negative; the record may begin after or end before the clip
 * as long as a fifth of the shorter one overlaps.
 *
 * @returns record time = offsetSeconds + (1 + driftPpm·1e-6) · clip time; residual is rms error over the span of the
 *   prediction; confidence 0…1 with its reasons (`evidence`), below `alignmentReviewBelow` a person should look
 * @throws AlignError when there are fewer than 12 measured frames or nothing overlaps
 * Accuracy on seeded truth, clips of 20 s and more with edges or beat: offset 0.01 frame, drift 3 ppm.
 */
export function alignClip(input: AlignInput): AlignResult {
  const problem = pose(input)
  const { best, second, noiseVariance } = solve(problem)
  const timing = { frameTimesSeconds: input.frameTimesSeconds, exposureSeconds: input.exposureSeconds, offsetSeconds: offsetOf(best), driftPpm: best.driftPpm }
  const predicted = predictFrameLight(problem.integrals, timing)
  let lowest = Number.POSITIVE_INFINITY
  let highest = Number.NEGATIVE_INFINITY
  for (let k = 0; k < predicted.length; k++) {
    predicted[k] = best.gain * predicted[k] + best.background
    if (predicted[k] < lowest) lowest = predicted[k]
    if (predicted[k] > highest) highest = predicted[k]
  }
  const residual = highest > lowest ? Math.min(1, Math.sqrt(best.squares / best.frames) / (highest - lowest)) : 1
  const { confidence, evidence } = judgeAlignment(problem, { best, second, noiseVariance, residual })
  return { offsetSeconds: timing.offsetSeconds, driftPpm: timing.driftPpm, residual, confidence, method: 'light', version: 1, evidence, predicted }
}
