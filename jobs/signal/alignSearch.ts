import { coarseCandidates, type CoarseCandidate } from './alignCoarse'
import { searchGrid } from './alignGrid'
import { polish, type Polished } from './alignPolish'
import { explained, offsetOf, type AlignProblem, type AlignSolution } from './alignProblem'
import { beatAmplitude } from './lampTones'

export interface FrameRange {
  fromFrame: number
  toFrame: number
}

interface Spanned {
  solution: AlignSolution
  range: FrameRange
}

const mostCandidates = { complete: 12, sparse: 60 }
const mostPolished = 24
const mostContenders = 16
/** Longer clips are aligned on a stretch of this length first, which is then doubled up to the whole. */
export const firstSpanSeconds = 60

/** Frames of a candidate that the record covers. */
export function coveredRange(problem: AlignProblem, offsetSeconds: number): FrameRange {
  const { times, recordSeconds, exposureSeconds } = problem
  let fromFrame = 0
  while (fromFrame < times.length - 1 && times[fromFrame] + offsetSeconds < 0) fromFrame++
  let toFrame = times.length
  while (toFrame > fromFrame + 1 && times[toFrame - 1] + offsetSeconds + exposureSeconds > recordSeconds) toFrame--
  return { fromFrame, toFrame }
}

/** The stretch of at most `seconds` in the range whose light varies most. */
export function liveliestSpan(problem: AlignProblem, range: FrameRange, seconds: number): FrameRange {
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
export function gridStep(problem: AlignProblem): number {
  const fastest = Math.max(0, ...problem.tones.filter(tone => beatAmplitude(tone, problem.exposureSeconds) > 0.001).map(tone => tone.frequencyHz))
  return Math.max(problem.frameSeconds / 400, Math.min(problem.frameSeconds / 20, 1 / (10 * Math.max(fastest, 1))))
}

/** Grid minima of one coarse candidate on its first stretch. */
function expand(problem: AlignProblem, candidate: CoarseCandidate, step: number): Spanned[] {
  const covered = coveredRange(problem, candidate.offsetSeconds)
  const range = problem.sparse ? covered : liveliestSpan(problem, covered, firstSpanSeconds)
  const pivotSeconds = (problem.times[range.fromFrame] + problem.times[range.toFrame - 1]) / 2
  const middleSeconds = candidate.offsetSeconds + (1 + candidate.driftPpm * 1e-6) * pivotSeconds
  const halfRangeSeconds = Math.max(problem.frameSeconds * 0.6, 2 * candidate.stepSeconds)
  const drift = { driftPpm: 0, halfRangePpm: problem.maxDriftPpm }
  const area = { ...range, middleSeconds, pivotSeconds, halfRangeSeconds, stepSeconds: step, ...drift }
  return searchGrid(problem, area, 10).map(solution => ({ solution, range }))
}

/** From a solution on its stretch to one on all covered frames, doubling the stretch; a small grid keeps it in its minimum. */
export function settle(problem: AlignProblem, start: { solution: Polished, range: FrameRange }, step: number): Polished {
  let { solution, range } = start
  for (;;) {
    const covered = coveredRange(problem, offsetOf(solution))
    if (range.fromFrame <= covered.fromFrame && range.toFrame >= covered.toFrame) return solution
    const more = Math.ceil((range.toFrame - range.fromFrame) / 2)
    const next = { fromFrame: Math.max(covered.fromFrame, range.fromFrame - more), toFrame: Math.min(covered.toFrame, range.toFrame + more) }
    if (next.toFrame - next.fromFrame <= range.toFrame - range.fromFrame) return solution
    const pivotSeconds = (problem.times[next.fromFrame] + problem.times[next.toFrame - 1]) / 2
    const middleSeconds = solution.middleSeconds + (1 + solution.driftPpm * 1e-6) * (pivotSeconds - solution.pivotSeconds)
    const halfRangePpm = Math.min(4 * solution.driftDeviationPpm + 0.2, problem.maxDriftPpm)
    const area = { ...next, middleSeconds, pivotSeconds, halfRangeSeconds: 2 * step, stepSeconds: step / 2, driftPpm: solution.driftPpm, halfRangePpm }
    solution = polish(problem, searchGrid(problem, area, 1)[0] ?? { ...solution, middleSeconds, pivotSeconds }, next)
    range = next
  }
}

/** How far apart two solutions are: the larger of their distances at the clip's two ends, seconds. */
function distance(problem: AlignProblem, a: AlignSolution, b: AlignSolution): number {
  const last = problem.times[problem.times.length - 1]
  const startGap = offsetOf(a) - offsetOf(b)
  const endGap = startGap + (a.driftPpm - b.driftPpm) * 1e-6 * last
  return Math.max(Math.abs(startGap), Math.abs(endGap))
}

/** Best first, those within `apart` of a better one left out. */
export function distinct<T extends { solution: AlignSolution }>(problem: AlignProblem, entries: T[], apart: number): T[] {
  const kept: T[] = []
  for (const entry of entries.sort((a, b) => explained(problem, b.solution) - explained(problem, a.solution))) {
    if (!kept.some(other => distance(problem, other.solution, entry.solution) < apart)) kept.push(entry)
  }
  return kept
}

/**
 * The best alignment and the best one elsewhere: coarse candidates over the full range, a joint grid around each, the
 * local minima polished, the best of them followed to the whole clip.
 *
 * @returns null when nothing overlaps enough; `second` differs by more than half a period of the fastest tone (or, if
 *   that is smaller, a fiftieth of a frame) at one end of the clip; `contenders` are both and more such, best first
 */
export function searchAlignment(problem: AlignProblem): { best: Polished, second: Polished | null, contenders: Polished[] } | null {
  const step = gridStep(problem)
  const candidates = coarseCandidates(problem, problem.sparse ? mostCandidates.sparse : mostCandidates.complete)
  const minima = distinct(problem, candidates.flatMap(candidate => expand(problem, candidate, step)), step)
  if (!minima.length) return null
  const polished = minima.slice(0, mostPolished).map(({ solution, range }) => ({ solution: polish(problem, solution, range), range }))
  const fastest = Math.max(1, ...problem.tones.map(tone => tone.frequencyHz))
  const elsewhere = Math.min(0.3 * problem.frameSeconds, Math.max(0.02 * problem.frameSeconds, 0.5 / fastest))
  const whole = distinct(problem, polished, step).slice(0, problem.sparse ? mostContenders : 6).map(entry => ({ solution: settle(problem, entry, step) }))
  const contenders = distinct(problem, whole, elsewhere).map(entry => entry.solution)
  return { best: contenders[0], second: contenders[1] ?? null, contenders }
}
