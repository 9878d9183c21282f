import { alignmentReviewBelow, type Alignment, type AlignmentEvidence, type FrameLoss } from '../../shared/measurement'
import { gradeAlignment } from './alignConfidence'
import { searchNear, stayed } from './alignNear'
import { evaluateAt, polish, type Polished } from './alignPolish'
import { median, offsetOf, type AlignProblem } from './alignProblem'
import { searchAlignment } from './alignSearch'
import { correctFrameTimes } from './frameLoss'
import { disagreeingBlocks, findLosses, type FoundLosses } from './frameLossSearch'
import { lampTones } from './lampTones'
import { createLightIntegrals, predictFrameLight } from './lightPrediction'

/** Clip or record too short to be aligned. */
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
  /** Time missing in mid-clip, in order; offset and drift refer to clip times corrected by it (`correctFrameTimes`). */
  losses: FrameLoss[]
  /** From a glance only: the best fit and those elsewhere that `planMoreWindows` should tell apart, best first. */
  contenders?: { offsetSeconds: number, driftPpm: number, gain: number, background: number }[]
}

/** More odd frames than this share are no accidents: lamp changes that the record has elsewhere look like them. */
const mostOddShare = 0.003

/** Below this share of measured frames the gaps are too wide to be bridged. */
const sparseShare = 0.7

/** Rms error over the light's spread from which lost frames are looked for in any case. */
const poorFit = 0.05

function pose(input: AlignInput, known?: AlignProblem): AlignProblem {
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
    light, times, frames: Int32Array.from(kept),
    exposureSeconds: input.exposureSeconds,
    frameSeconds: median(frameTimesSeconds.slice(1).map((time, k) => time - frameTimesSeconds[k])),
    integrals: known?.integrals ?? createLightIntegrals(illumination, sampleRateHz, input.darkLevel),
    recordSeconds: (illumination.length - 1) / sampleRateHz,
    tones: known?.tones ?? lampTones(illumination, sampleRateHz),
    maxDriftPpm: input.maxDriftPpm ?? 200,
    lightVariance: light.reduce((sum, value) => sum + (value - mean) ** 2, 0) / light.length,
    sparse: light.length < sparseShare * frameLight.length,
  }
}

/**
 * Tie clip time to record time by the light: every frame's mean is predicted as gain · (1/T_e)∫ L dt + background and
 * offset, drift, gain and background are fitted to all frames that the record covers.
 *
 * Full-range coarse search by normalised cross-correlation, a joint grid over offset and drift around the best
 * candidates, damped Gauss–Newton at the end. Offsets may be negative; the record may begin after or end before the clip
 * as long as a fifth of the shorter one overlaps. Single frames that no timing explains (flashes, corrupt frames) are left
 * out, at most two or 0.3 % of the clip.
 *
 * @returns record time = offsetSeconds + (1 + driftPpm·1e-6) · clip time; residual is rms error over the span of the
 *   prediction; confidence 0…1 with its reasons (`evidence`), below `alignmentReviewBelow` a person should look; offset 0 with confidence 0 when nothing fits
 * @throws AlignError when there are fewer than 12 measured frames or 64 samples
 * Accuracy on seeded truth, clips of 20 s and more with edges or beat: offset 0.01 frame, drift 3 ppm.
 */
export function alignClip(input: AlignInput): AlignResult {
  const problem = pose(input)
  return conclude(input, problem, searchAlignment(problem), 'search')
}

/**
 * The alignment made anew from a start that is known to be good, as after a glance, now with the light of all frames: the
 * minimum next to it is polished and a quick coarse search looks whether any other place of the record fits as well. When
 * the fit moves away from the start, or is not sure, the full search of `alignClip` decides.
 *
 * @param previous offset and drift to start from, good to half a frame
 * @returns and throws as `alignClip`
 */
export function alignNear(input: AlignInput, previous: { offsetSeconds: number, driftPpm: number }): AlignResult {
  const problem = pose(input)
  const found = searchNear(problem, previous)
  if (!found || !stayed(problem, previous, found.best)) return conclude(input, problem, searchAlignment(problem), 'search')
  const near = conclude(input, problem, found, 'near')
  return near.confidence >= alignmentReviewBelow ? near : conclude(input, problem, searchAlignment(problem), 'search')
}

interface Found {
  best: Polished
  second: Polished | null
  contenders?: Polished[]
}

/** From the best fit to the result: losses in mid-clip, single odd frames, grade. */
function conclude(input: AlignInput, problem: AlignProblem, found: Found | null, how: 'search' | 'near'): AlignResult {
  if (!found) {
    const reason = 'The light of the clip and the lamp signal have nothing in common; check that clip, record and channel belong together, or set offset and drift by hand.'
    return unjudged(input, { offsetSeconds: 0, driftPpm: 0, method: 'light', version: 1 }, reason)
  }
  const blocks = problem.sparse ? { late: 0, odd: 0 } : disagreeingBlocks(problem, found.best)
  const poor = found.best.squares > (poorFit ** 2) * found.best.coveredSquares
  const lost = !problem.sparse && (poor || blocks.odd >= 2) ? findLosses(problem, found.best) : null
  if (lost) return reportLosses(input, lost)
  const first = doubtTiming(report(input, problem, found), blocks.late)
  if (problem.sparse) {
    first.contenders = found.contenders?.map(solution => ({ offsetSeconds: offsetOf(solution), driftPpm: solution.driftPpm, gain: solution.gain, background: solution.background }))
    return first
  }
  const odd = oddFrames(input.frameLight, first.predicted)
  if (first.evidence.gain === 0 || odd.length === 0 || odd.length > Math.max(2, mostOddShare * input.frameLight.length)) return first
  const light = input.frameLight.slice()
  for (const frame of odd) light[frame] = Number.NaN
  const without = pose({ ...input, frameLight: light }, problem)
  const start = { offsetSeconds: first.offsetSeconds, driftPpm: first.driftPpm }
  const again = (how === 'near' && searchNear(without, start)) || searchAlignment(without)
  if (!again) return first
  const second = report(input, without, again)
  second.evidence.reasons.push(`${odd.length} ${odd.length === 1 ? 'frame' : 'frames'} whose light no timing explains (first: frame ${odd[0]}) ${odd.length === 1 ? 'was' : 'were'} left out of the fit.`)
  return second
}

/** No confidence in an alignment that parts of the clip contradict. */
function doubtTiming(result: AlignResult, lateBlocks: number): AlignResult {
  if (lateBlocks < 2) return result
  result.confidence = Math.min(result.confidence, 0.4)
  result.evidence.reasons.push(`${lateBlocks} stretches of the clip want another timing than the whole, and no lost or doubled frames explain it; look at the difference of measured and predicted light.`)
  return result
}

function reportLosses(input: AlignInput, lost: FoundLosses): AlignResult {
  const losses = lost.losses.map(loss => ({ ...loss, frame: lost.problem.frames[loss.frame], uncertainFrames: lost.problem.frames[loss.frame] - lost.problem.frames[loss.frame - loss.uncertainFrames] }))
  const corrected = { ...input, frameTimesSeconds: correctFrameTimes(input.frameTimesSeconds, losses) }
  const near = searchNear(lost.problem, { offsetSeconds: offsetOf(lost.solution), driftPpm: lost.solution.driftPpm })
  const result = report(corrected, lost.problem, { best: lost.solution, second: near?.second ?? null })
  result.losses = losses
  for (const { frame, uncertainFrames, lostFrames } of losses) {
    const what = lostFrames >= 0 ? `${lostFrames} ${lostFrames === 1 ? 'frame is' : 'frames are'} missing` : `${-lostFrames} ${lostFrames === -1 ? 'frame is' : 'frames are'} doubled`
    const where = uncertainFrames > 0 ? `somewhere between frames ${frame - uncertainFrames - 1} and ${frame}` : `right before frame ${frame}`
    result.evidence.reasons.push(`By the light, ${what} ${where}, though the timestamps run on; later frames are timed anew.`)
  }
  return doubtTiming(result, disagreeingBlocks(lost.problem, lost.solution).late)
}

/**
 * Judge an alignment set by hand: gain and background are fitted at the given offset and drift, nothing is moved.
 *
 * @returns as `alignClip`, with method `manual`; a reason tells when a better fit lies close by. NaN residual is not
 *   possible: an alignment under which the record covers fewer than 5 frames has residual 1 and confidence 0
 * @throws AlignError as `alignClip`
 */
export function judgeAlignment(input: AlignInput, manual: { offsetSeconds: number, driftPpm: number, version?: number }): AlignResult {
  const problem = pose(input)
  const all = { fromFrame: 0, toFrame: problem.times.length }
  const pivotSeconds = problem.times[problem.times.length - 1] / 2
  const middleSeconds = manual.offsetSeconds + (1 + manual.driftPpm * 1e-6) * pivotSeconds
  const set = evaluateAt(problem, all, middleSeconds, pivotSeconds, manual.driftPpm)
  if (set.frames < 5) {
    return unjudged(input, { ...manual, method: 'manual', version: manual.version ?? 1 }, 'With this offset the record covers hardly any frame of the clip; check its sign.')
  }
  const near = polish(problem, set, all)
  const deviations = { middleDeviationSeconds: near.middleDeviationSeconds, driftDeviationPpm: near.driftDeviationPpm }
  const result = report(input, problem, { best: { ...set, ...deviations }, second: null })
  if (near.squares / near.frames < 0.8 * set.squares / set.frames) {
    result.evidence.reasons.push(`A better fit lies near: offset ${offsetOf(near).toFixed(4)} s, drift ${near.driftPpm.toFixed(1)} ppm, residual ${(100 * Math.sqrt(near.squares * set.frames / near.frames / set.squares)).toFixed(0)} % of this one's.`)
  }
  return { ...result, offsetSeconds: manual.offsetSeconds, driftPpm: manual.driftPpm, method: 'manual', version: manual.version ?? 1 }
}

function unjudged(input: AlignInput, alignment: Pick<Alignment, 'offsetSeconds' | 'driftPpm' | 'method' | 'version'>, reason: string): AlignResult {
  return {
    ...alignment, residual: 1, confidence: 0,
    evidence: { gain: 0, background: 0, secondBestRatio: null, secondBestOffsetSeconds: null, edges: 0, beat: false, reasons: [reason] },
    predicted: new Float64Array(input.frameLight.length).fill(Number.NaN),
    losses: [],
  }
}

/** What a solution predicts, its residual, and how far it may be trusted. */
function report(input: AlignInput, problem: AlignProblem, found: { best: Polished, second: Polished | null }): AlignResult {
  const { best } = found
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
  const { confidence, evidence } = gradeAlignment(problem, { ...found, residual })
  return { offsetSeconds: timing.offsetSeconds, driftPpm: timing.driftPpm, residual, confidence, method: 'light', version: 1, evidence, predicted, losses: [] }
}

/** Single frames far off their prediction where it is so level that no error of timing can be the reason. */
function oddFrames(light: Float64Array, predicted: Float64Array): number[] {
  const errors = predicted.map((value, k) => Math.abs(light[k] - value))
  const spread = 1.4826 * median(errors.filter(Number.isFinite))
  const odd: number[] = []
  for (let k = 0; k < errors.length; k++) {
    if (!(errors[k] > 8 * spread)) continue
    const near = [k - 2, k - 1, k, k + 1, k + 2].filter(n => n >= 0 && n < errors.length && Number.isFinite(predicted[n]))
    const levels = near.map(n => predicted[n])
    const alone = near.every(n => n === k || !(errors[n] > errors[k] / 4))
    if (alone && Math.max(...levels) - Math.min(...levels) < errors[k] / 2) odd.push(k)
  }
  return odd
}
