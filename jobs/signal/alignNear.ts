import { coarseCandidates } from './alignCoarse'
import { searchGrid } from './alignGrid'
import { polish, type Polished } from './alignPolish'
import { explained, offsetOf, type AlignProblem, type AlignSolution } from './alignProblem'
import { coveredRange, distinct, firstSpanSeconds, gridStep, liveliestSpan, settle, type FrameRange } from './alignSearch'

interface Start {
  offsetSeconds: number
  driftPpm: number
}

/** Other places of the record looked at to see that the fit is still the best one. */
const mostElsewhere = 3

/**
 * The minimum next to a good start (within half a frame and some ppm), and the best fit elsewhere: aliases of the beat
 * within a frame, and the best places of a quick coarse search over the full range.
 *
 * @returns null when the record covers hardly any frame under `start`
 */
export function searchNear(problem: AlignProblem, start: Start): { best: Polished, second: Polished | null } | null {
  const covered = coveredRange(problem, start.offsetSeconds)
  if (covered.toFrame - covered.fromFrame < 12) return null
  const step = gridStep(problem)
  const range = liveliestSpan(problem, covered, firstSpanSeconds)
  const here = minima(problem, start, range, { halfRangeSeconds: 0.6 * problem.frameSeconds, step }).slice(0, 3)
  const away = elsewhere(problem, start)
  const polished = [...here, ...away].map(entry => ({ solution: polish(problem, entry.solution, entry.range), range: entry.range }))
  const apart = Math.min(0.3 * problem.frameSeconds, Math.max(0.02 * problem.frameSeconds, 0.5 / Math.max(1, ...problem.tones.map(tone => tone.frequencyHz))))
  const whole = distinct(problem, polished, step).slice(0, 3).map(entry => ({ solution: settle(problem, entry, step) }))
  const [best, second] = distinct(problem, whole, apart)
  return best ? { best: best.solution, second: second?.solution ?? null } : null
}

/** Grid minima about a start at its own drift. */
function minima(problem: AlignProblem, start: Start, range: FrameRange, grid: { halfRangeSeconds: number, step: number }): { solution: AlignSolution, range: FrameRange }[] {
  const pivotSeconds = (problem.times[range.fromFrame] + problem.times[range.toFrame - 1]) / 2
  const middleSeconds = start.offsetSeconds + (1 + start.driftPpm * 1e-6) * pivotSeconds
  const area = { ...range, middleSeconds, pivotSeconds, halfRangeSeconds: grid.halfRangeSeconds, stepSeconds: grid.step, driftPpm: start.driftPpm, halfRangePpm: 0 }
  return searchGrid(problem, area, 8).map(solution => ({ solution, range }))
}

/** Where else the light might fit, by the lamp's edges and levels: one coarse grid minimum each. */
function elsewhere(problem: AlignProblem, start: Start) {
  const candidates = coarseCandidates({ ...problem, tones: [] }, 12)
    .filter(candidate => Math.abs(candidate.offsetSeconds - start.offsetSeconds) > 2 * Math.max(problem.frameSeconds, candidate.stepSeconds))
  const found = candidates.slice(0, 2 * mostElsewhere).flatMap((candidate) => {
    const range = liveliestSpan(problem, coveredRange(problem, candidate.offsetSeconds), firstSpanSeconds)
    return minima(problem, candidate, range, { halfRangeSeconds: Math.max(problem.frameSeconds, candidate.stepSeconds), step: problem.frameSeconds / 8 }).slice(0, 1)
  })
  return found.sort((a, b) => explained(problem, b.solution) - explained(problem, a.solution)).slice(0, mostElsewhere)
}

/** Whether a solution is still the one it was begun from. */
export function stayed(problem: AlignProblem, start: Start, solution: AlignSolution): boolean {
  const last = problem.times[problem.times.length - 1]
  const atStart = offsetOf(solution) - start.offsetSeconds
  const atEnd = atStart + (solution.driftPpm - start.driftPpm) * 1e-6 * last
  return Math.abs(atStart + atEnd) / 2 < 0.6 * problem.frameSeconds
}
