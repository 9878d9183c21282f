import type { FrameLoss } from '../../shared/measurement'
import { errorsOf } from './alignConfidence'
import { polish, type Polished } from './alignPolish'
import { explained, median, offsetOf, type AlignProblem, type AlignSolution } from './alignProblem'
import { searchAlignment } from './alignSearch'
import { correctFrameTimes } from './frameLoss'
import { shiftPath } from './frameLossPath'
import { lightAt, windowMean } from './lightPrediction'

export interface FoundLosses {
  losses: FrameLoss[]
  /** The problem with corrected times, and its solution. */
  problem: AlignProblem
  solution: Polished
}

/** Largest gap looked for, frames. */
const mostLostFrames = 60
/** A camera shows a frame again once or twice; a course that goes back further is a chance likeness of other light. */
const mostDoubledFrames = 5
/** Frames of a block that is asked for its own timing. */
const blockFrames = 25
/** More losses than one in so many seconds are none: clip and record are of different shots. */
const fewestSecondsEach = 12
/** Cost of a frame that a shift moves out of the record: what one that fits costs too, and less than a step for the largest gap. */
const outsideNats = 0.6
/** Fractions of a frame by which a loss may differ from whole frames and still be whole. */
const wholeTolerance = 0.06

/**
 * Blocks of 25 frames that do not agree with the whole: `late` ones are off by 0.1 frame with certainty, `odd` ones are that
 * or have errors far above those of the rest (which a flash or a bump of light has too).
 */
export function disagreeingBlocks(problem: AlignProblem, solution: Polished): { late: number, odd: number } {
  const errors = errorsOf(problem, solution)
  const noise = noiseOf(problem, errors)
  let late = 0
  let odd = 0
  for (let from = 0; from + blockFrames <= errors.length; from += blockFrames) {
    const { products, slopes, squares, frames } = timingSums(problem, solution, errors, from, from + blockFrames)
    const shift = Math.abs(products / slopes)
    const isLate = shift > 0.1 && shift > 8 * noise / Math.sqrt(slopes)
    if (isLate) late++
    if (isLate || squares > 25 * noise ** 2 * frames) odd++
  }
  return { late, odd }
}

/** Sums over frames that measure an error of timing: light's error against its slope in frames. */
function timingSums(problem: AlignProblem, solution: Polished, errors: Float64Array, from: number, to: number): { products: number, slopes: number, squares: number, frames: number } {
  const sums = { products: 0, slopes: 0, squares: 0, frames: 0 }
  for (let k = from; k < to; k++) {
    if (Number.isNaN(errors[k])) continue
    const slope = slopeAt(problem, solution, problem.times[k]) * problem.frameSeconds
    sums.products += slope * errors[k]
    sums.slopes += slope * slope
    sums.squares += errors[k] ** 2
    sums.frames++
  }
  return sums
}

function slopeAt(problem: AlignProblem, solution: AlignSolution, time: number): number {
  const start = offsetOf(solution) + (1 + solution.driftPpm * 1e-6) * time
  return solution.gain * (lightAt(problem.integrals, start + problem.exposureSeconds) - lightAt(problem.integrals, start)) / problem.exposureSeconds
}

/** Robust noise of a frame, at least 0.3 % of the light's spread, which a slightly wrong transfer leaves. */
function noiseOf(problem: AlignProblem, errors: Float64Array): number {
  return Math.max(1.4826 * median(errors.filter(Number.isFinite).map(Math.abs)), 0.003 * Math.sqrt(problem.lightVariance))
}

/**
 * Frames lost (or doubled) silently in mid-clip: the likeliest course of whole-frame shifts, begun from the alignment of the
 * whole clip and from those of its parts, alternating with a fit of offset and drift to the corrected times.
 *
 * @returns null when nothing was lost, or nothing that explains the light convincingly
 */
export function findLosses(problem: AlignProblem, whole: Polished): FoundLosses | null {
  let best: FoundLosses | null = null
  let cost = fitCost(problem, whole)
  for (const start of starts(problem, whole)) {
    const found = follow(problem, start.solution, start.noise)
    if (!found?.losses.length || found.losses.some(({ lostFrames }) => lostFrames < -mostDoubledFrames)) continue
    // Each loss has two numbers to fit with, and must earn them.
    const foundCost = fitCost(found.problem, found.solution) + 60 * found.losses.length
    if (foundCost >= cost) continue
    best = found
    cost = foundCost
    if (disagreeingBlocks(found.problem, found.solution).odd < 2) return best
  }
  return best
}

/** −2·log-likelihood of a fit but for a constant, with a floor under the noise. */
function fitCost(problem: AlignProblem, solution: Polished): number {
  return problem.light.length * Math.log(solution.squares / solution.frames + 1e-5 * problem.lightVariance + Number.MIN_VALUE)
}

/** The whole clip's solution, then those of parts of it, the best explained ones first: some part has no loss in it. */
function* starts(problem: AlignProblem, whole: Polished): Generator<{ solution: AlignSolution, noise: number }> {
  yield { solution: whole, noise: noiseOf(problem, errorsOf(problem, whole)) }
  const seconds = problem.times[problem.times.length - 1]
  const partFrames = Math.round(Math.min(30, Math.max(10, seconds / 5)) / problem.frameSeconds)
  const parts = Math.max(2, Math.min(8, Math.floor(1.5 * problem.times.length / partFrames)))
  const found = Array.from({ length: parts }, (_, part) => alignPart(problem, Math.floor(part * (problem.times.length - partFrames) / (parts - 1)), partFrames))
  for (const { solution, noise } of found.filter(part => part !== null).sort((x, y) => y.score - x.score).slice(0, 4)) yield { solution, noise }
}

function alignPart(problem: AlignProblem, from: number, frames: number): { solution: AlignSolution, noise: number, score: number } | null {
  const to = Math.min(problem.times.length, from + frames)
  if (from < 0 || to - from < 50) return null
  const origin = problem.times[from]
  const light = problem.light.slice(from, to)
  const mean = light.reduce((sum, value) => sum + value / light.length, 0)
  const lightVariance = light.reduce((sum, value) => sum + (value - mean) ** 2 / light.length, 0)
  const piece = { ...problem, light, lightVariance, times: problem.times.slice(from, to).map(time => time - origin) }
  const best = searchAlignment(piece)?.best
  if (!best) return null
  return { solution: { ...best, pivotSeconds: best.pivotSeconds + origin }, noise: Math.max(noiseOf(piece, errorsOf(piece, best)), 0.003 * Math.sqrt(problem.lightVariance)), score: explained(piece, best) }
}

/** Shifts and fit in turn, until the shifts stay. */
function follow(problem: AlignProblem, start: AlignSolution, startNoise: number): FoundLosses | null {
  const { frameSeconds, times, light, integrals, exposureSeconds } = problem
  let current: AlignSolution = start
  let noise = startNoise
  let result: FoundLosses | null = null
  let before = ''
  for (let pass = 0; pass < 5; pass++) {
    const offset = offsetOf(current)
    const rate = 1 + current.driftPpm * 1e-6
    const { gain, background } = current
    const misfit = (k: number, shift: number) => (light[k] - background - gain * windowMean(integrals, offset + rate * (times[k] + shift * frameSeconds), exposureSeconds)) ** 2 / (3 * noise * noise)
    // Where the clip runs beyond the record nothing is known; a shift that only leaves the record is no explanation.
    const inside = times.map((_, k) => misfit(k, 0))
    const known = (k: number, shift: number) => {
      const value = shift === 0 ? inside[k] : Number.isNaN(inside[k]) ? Number.NaN : misfit(k, shift)
      return Number.isNaN(value) && !Number.isNaN(inside[k]) ? outsideNats : value
    }
    const path = shiftPath(known, times.length, Math.min(mostLostFrames, times.length >> 2))
    if (path.steps.length > 1 + (times[times.length - 1] - times[0]) / fewestSecondsEach) return null
    let shift = path.first
    const losses = path.steps.map((step) => {
      const lostFrames = step.shift - shift
      shift = step.shift
      return { frame: step.frame, uncertainFrames: step.uncertainFrames, lostFrames, lostSeconds: lostFrames * frameSeconds }
    })
    const corrected = { ...problem, times: correctFrameTimes(times, losses) }
    const middleSeconds = current.middleSeconds + path.first * frameSeconds * rate
    const solution = polish(corrected, { ...current, middleSeconds }, { fromFrame: 0, toFrame: times.length })
    result = { losses, problem: corrected, solution }
    const now = losses.map(loss => `${loss.frame}:${loss.lostFrames}`).join()
    if (now === before && path.first === 0) break
    before = now
    current = solution
    noise = Math.min(noise, noiseOf(corrected, errorsOf(corrected, solution)))
  }
  return result && withFractions(problem, result)
}

/** Sizes measured on both sides of a loss; those that are whole frames within tolerance stay so. */
function withFractions(problem: AlignProblem, found: FoundLosses): FoundLosses {
  const bounds = [0, ...found.losses.map(loss => loss.frame), problem.times.length]
  const shifts = bounds.slice(1).map((to, s) => blockShift(found.problem, found.solution, bounds[s], to - (found.losses[s]?.uncertainFrames ?? 0)))
  let changed = false
  const losses = found.losses.map((loss, s) => {
    const shift = shifts[s + 1].shift - shifts[s].shift
    const deviation = Math.hypot(shifts[s + 1].deviation, shifts[s].deviation)
    if (!(Math.abs(shift) > wholeTolerance + 4 * deviation)) return loss
    changed = true
    return { ...loss, lostSeconds: loss.lostSeconds + shift * problem.frameSeconds }
  })
  if (!changed) return found
  const corrected = { ...problem, times: correctFrameTimes(problem.times, losses) }
  return { losses, problem: corrected, solution: polish(corrected, found.solution, { fromFrame: 0, toFrame: problem.times.length }) }
}

/** By how many frames a stretch lies later than a solution says, to first order, and the deviation of that. */
function blockShift(problem: AlignProblem, solution: Polished, from: number, to: number): { shift: number, deviation: number } {
  const { products, slopes, squares, frames } = timingSums(problem, solution, errorsOf(problem, solution), from, to)
  return { shift: slopes > 0 ? products / slopes : 0, deviation: slopes > 0 ? Math.sqrt(squares / Math.max(1, frames) / slopes) : Number.POSITIVE_INFINITY }
}
