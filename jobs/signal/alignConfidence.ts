import type { AlignmentEvidence } from '../../shared/measurement'
import type { Polished } from './alignPolish'
import { offsetOf, type AlignProblem } from './alignProblem'
import { beatAmplitude } from './lampTones'
import { predictFrameLight, windowMean } from './lightPrediction'

interface Judged {
  best: Polished
  second: Polished | null
  residual: number
}

/** 0 at or beyond `bad`, 1 at or beyond `good`, linear in the logarithm between. */
function grade(value: number, bad: number, good: number): number {
  if (Number.isNaN(value)) return 0
  return Math.min(1, Math.max(0, (Math.log(Math.max(value, 1e-12)) - Math.log(bad)) / (Math.log(good) - Math.log(bad))))
}

/** Lamp edges and level steps in the covered part of the record: changes of a mean over eight periods by 15 % of the highest level. */
function countEdges(problem: AlignProblem, best: Polished): number {
  const { integrals, times, recordSeconds } = problem
  const from = Math.max(0, offsetOf(best))
  const to = Math.min(recordSeconds, offsetOf(best) + (1 + best.driftPpm * 1e-6) * times[times.length - 1])
  const slowest = Math.min(...problem.tones.map(tone => tone.frequencyHz))
  const span = Math.max(0.1, Number.isFinite(slowest) ? 8 / slowest : 0)
  const changes: number[] = []
  let highest = 0
  for (let time = from + span; time < to - span; time += span / 5) {
    const before = windowMean(integrals, time - span, span)
    const after = windowMean(integrals, time, span)
    highest = Math.max(highest, Math.abs(before), Math.abs(after))
    changes.push(Math.abs(after - before))
  }
  let edges = 0
  let quiet = 5
  for (let k = 0; k < changes.length; k++) {
    const peak = changes[k] > 0.15 * highest && changes[k] >= Math.max(changes[k - 1] ?? 0, changes[k + 1] ?? 0)
    if (peak && quiet >= 5) {
      edges++
      quiet = 0
    } else {
      quiet++
    }
  }
  return edges
}

function wholePeriods(problem: AlignProblem): { frequencyHz: number, periods: number } | null {
  for (const tone of problem.tones) {
    const periods = tone.frequencyHz * problem.exposureSeconds
    if (periods > 0.5 && Math.abs(periods - Math.round(periods)) < 0.012) return { frequencyHz: tone.frequencyHz, periods: Math.round(periods) }
  }
  return null
}

function featureSentence(problem: AlignProblem, edges: number, beat: boolean): string {
  const whole = wholePeriods(problem)
  if (beat && edges > 0) return `${edges} lamp ${edges === 1 ? 'edge or level step' : 'edges or level steps'} and the lamp's beat in the frames tie clip and record together.`
  if (beat) return 'No lamp edge lies inside the clip; only the lamp\'s beat in the frames ties it to the record.'
  const why = whole
    ? `The lamp completes a whole number of periods in each exposure (${whole.frequencyHz.toFixed(1)} Hz, ${whole.periods} periods), so the frames carry no beat`
    : 'The frames carry no beat of the lamp above their noise'
  if (edges > 0) return `${why}; only ${edges} lamp ${edges === 1 ? 'edge or level step ties' : 'edges or level steps tie'} clip and record together.`
  return `${why}, and no lamp edge lies inside the clip: nothing ties clip and record together. Set offset and drift by hand.`
}

/** Light and error (NaN where the record does not cover it) of every frame under a solution. */
export function errorsOf(problem: AlignProblem, solution: Polished): Float64Array {
  const timing = { frameTimesSeconds: problem.times, exposureSeconds: problem.exposureSeconds, offsetSeconds: offsetOf(solution), driftPpm: solution.driftPpm }
  return predictFrameLight(problem.integrals, timing).map((mean, k) => problem.light[k] - solution.gain * mean - solution.background)
}

/** Sum of squares of a first-order autoregressive series' innovations, and their number. */
function innovations(series: ArrayLike<number>, correlation: number) {
  let squares = 0
  let count = 0
  for (let k = 1; k < series.length; k++) {
    const innovation = series[k] - correlation * series[k - 1]
    if (Number.isNaN(innovation)) continue
    squares += innovation * innovation
    count++
  }
  return { squares, count }
}

function frameCorrelation(errors: Float64Array): number {
  let squares = 0
  let products = 0
  for (let k = 1; k < errors.length; k++) {
    const product = errors[k] * errors[k - 1]
    if (Number.isNaN(product)) continue
    products += product
    squares += (errors[k] ** 2 + errors[k - 1] ** 2) / 2
  }
  return squares > 0 ? Math.min(0.98, Math.max(0, products / squares)) : 0
}

/** Rms of what is new in each frame's error over that of the errors: slow ones (gain drifting with temperature) do not blur timing. */
function quickShare(problem: AlignProblem, solution: Polished): number {
  const errors = errorsOf(problem, solution)
  const { squares, count } = innovations(errors, frameCorrelation(errors))
  return count > 0 && solution.squares > 0 ? Math.min(1, Math.sqrt(squares / count / (solution.squares / solution.frames))) : 1
}

/** What a solution explains of the light (see `explained`), in nats over all frames, errors taken as autoregressive. */
function explainedNats(problem: AlignProblem, errors: Float64Array, correlation: number): number {
  const fit = innovations(errors, correlation)
  const covered = problem.light.map((value, k) => Number.isNaN(errors[k]) ? Number.NaN : value)
  let mean = 0
  let count = 0
  for (const value of covered) {
    if (Number.isNaN(value)) continue
    mean += value
    count++
  }
  const none = innovations(covered.map(value => value - mean / count), correlation)
  const floor = (1e-6 * problem.lightVariance + Number.MIN_VALUE) * fit.count
  return 0.5 * fit.count * Math.log((none.squares + floor) / (fit.squares + floor))
}

/**
 * How much worse the best solution elsewhere is, with slow errors (gain drifting with temperature) taken out by their
 * correlation from frame to frame.
 *
 * Full marks need its residual 15 % above the best one's (systematic errors move it by some percent) and a difference
 * worth 60 nats (10 for none), so that noise cannot make it.
 */
function uniqueness(problem: AlignProblem, best: Polished, second: Polished): { ratio: number, grade: number } {
  const errors = errorsOf(problem, best)
  const correlation = frameCorrelation(errors)
  const nats = explainedNats(problem, errors, correlation) - explainedNats(problem, errorsOf(problem, second), correlation)
  const ratio = Math.max(1, Math.exp(nats / problem.light.length))
  // The few frames of a glance choose among all places of the record, and a second look costs little.
  const enough = problem.sparse ? (nats - 30) / 100 : (nats - 10) / 50
  return { ratio, grade: Math.min(1, Math.max(0, (ratio - 1) / 0.15)) * Math.min(1, Math.max(0, enough)) }
}

/**
 * How far an automatic alignment may be trusted, and why.
 *
 * The confidence is the weakest of six grades: features seen (edges, beat), residual over the span of light, how much
 * worse the best solution elsewhere is, formal precision of the offset against a frame in the middle of what the record
 * covers and at the clip's start, and share of the clip covered.
 * Each grade below 1 gives a sentence.
 */
export function gradeAlignment(problem: AlignProblem, judged: Judged): { confidence: number, evidence: AlignmentEvidence } {
  const { best, second, residual } = judged
  const edges = countEdges(problem, best)
  const residualRms = Math.sqrt(best.squares / best.frames)
  const highest = problem.light.reduce((most, value) => Math.max(most, value - best.background), 0)
  const brightest = problem.light.reduce((most, value) => Math.max(most, Math.abs(value)), Number.MIN_VALUE)
  const strongest = Math.max(0, ...problem.tones.map(tone => beatAmplitude(tone, problem.exposureSeconds))) * highest
  const beat = strongest > Math.max(1.5 * residualRms, 0.0015 * highest)
  const unique = second && uniqueness(problem, best, second)
  const precisionFrames = best.middleDeviationSeconds / problem.frameSeconds
  const startFrames = quickShare(problem, best) * Math.hypot(best.middleDeviationSeconds, best.driftDeviationPpm * 1e-6 * best.pivotSeconds) / problem.frameSeconds
  const covered = best.frames / problem.light.length
  const grades = {
    features: edges >= 2 ? 1 : edges === 1 ? (beat ? 0.9 : 0.65) : beat ? 0.75 : 0.1,
    residual: grade(residualRms / brightest, 0.06, 0.012),
    uniqueness: unique?.grade ?? 1,
    precision: grade(precisionFrames, 0.3, 0.02),
    // Errors are not independent from frame to frame, so the truth lies up to five such deviations away.
    extrapolation: problem.sparse ? grade(startFrames, 0.1, 0.004) : grade(startFrames, 0.005, 0.0012),
    coverage: covered >= 0.9 ? 1 : 0.5 + 0.5 * covered / 0.9,
  }
  const reasons = [featureSentence(problem, edges, beat)]
  if (grades.residual < 1) reasons.push(`Measured and predicted light differ by ${(100 * residual).toFixed(1)} % of their span; check transfer, exposure and channel.`)
  if (unique && grades.uniqueness < 1) {
    reasons.push(`An offset of ${offsetOf(second!).toFixed(4)} s fits nearly as well (residual ${unique.ratio.toFixed(3)} times the best one's); compare the two.`)
  }
  if (grades.precision < 1) {
    reasons.push(Number.isFinite(precisionFrames)
      ? `The light fixes the offset only to about ${precisionFrames.toFixed(2)} frame.`
      : 'The light does not fix the offset at all.')
  } else if (grades.extrapolation < 0.6) reasons.push(`The light fixes drift only to about ${best.driftDeviationPpm.toFixed(1)} ppm, and the offset at the clip's start only to about ${(5 * startFrames).toFixed(3)} frame.`)
  if (grades.coverage < 1) reasons.push(`The record covers only ${Math.round(100 * covered)} % of the clip's frames.`)
  return {
    confidence: Math.min(...Object.values(grades)),
    evidence: {
      gain: best.gain, background: best.background,
      secondBestRatio: unique?.ratio ?? null, secondBestOffsetSeconds: second && offsetOf(second),
      edges, beat, reasons,
    },
  }
}
