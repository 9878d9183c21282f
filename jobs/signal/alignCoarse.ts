import { explained, fitGain, type AlignProblem } from './alignProblem'
import { beatAmplitude } from './lampTones'
import { windowMean } from './lightPrediction'
import { fft, inverseFft, powerOfTwo } from './spectrum'

export interface CoarseCandidate {
  offsetSeconds: number
  driftPpm: number
  /** See `explained`. */
  score: number
  /** Step of the search, seconds: the offset is good to about this. */
  stepSeconds: number
}

interface Series {
  values: Float64Array
  sum: Float64Array
  squares: Float64Array
}

/** Overlap searched, as a share of the shorter one of clip and record. */
const leastOverlap = 0.2
/** Bound on phases × drifts × N·log2 N of the transforms. */
const transformBudget = 4e7

function prefixed(values: Float64Array): Series {
  const sum = new Float64Array(values.length + 1)
  const squares = new Float64Array(values.length + 1)
  for (let k = 0; k < values.length; k++) {
    sum[k + 1] = sum[k] + values[k]
    squares[k + 1] = squares[k] + values[k] * values[k]
  }
  return { values, sum, squares }
}

/** Frame light on a uniform grid of `step` seconds (means of the frames in a bin, gaps bridged), mean removed. */
function uniformLight(problem: AlignProblem, step: number, framesPerStep: number): Float64Array {
  const { times, light } = problem
  const size = Math.floor(times[times.length - 1] / step + 0.5) + 1
  const sums = new Float64Array(size)
  const counts = new Float64Array(size)
  let mean = 0
  for (let k = 0; k < times.length; k++) mean += light[k] / light.length
  for (let k = 0; k < times.length; k++) {
    const bin = Math.min(size - 1, framesPerStep === 1 ? Math.round(times[k] / step) : Math.floor(times[k] / step + 1e-6))
    sums[bin] += light[k] - mean
    counts[bin]++
  }
  let last = 0
  for (let bin = 0; bin < size; bin++) {
    if (counts[bin] > 0) last = sums[bin] / counts[bin]
    sums[bin] = last
  }
  return sums
}

/** How finely offset and drift must be searched: by the fastest tone that leaves a beat, within the budget. */
function searchPlan(problem: AlignProblem) {
  const clipSeconds = problem.times[problem.times.length - 1]
  const edgeDrifts = 2e-6 * problem.maxDriftPpm * clipSeconds / problem.frameSeconds
  const framesPerStep = Math.max(1, Math.ceil(edgeDrifts / 8))
  const step = framesPerStep * problem.frameSeconds
  const beating = framesPerStep === 1 ? problem.tones.filter(tone => beatAmplitude(tone, problem.exposureSeconds) > 0.002) : []
  const fastest = Math.max(0, ...beating.map(tone => tone.frequencyHz))
  const size = powerOfTwo(Math.ceil((clipSeconds + problem.recordSeconds) / step) + 4)
  let phases = Math.min(64, Math.max(4, Math.ceil(4 * fastest * step)))
  let drifts = Math.max(1, Math.ceil(edgeDrifts / framesPerStep), Math.ceil(2e-6 * problem.maxDriftPpm * clipSeconds * fastest))
  while (phases * drifts * size * Math.log2(size) > transformBudget && (phases > 4 || drifts > 3)) {
    if (drifts > 3 && drifts >= phases / 2) drifts = Math.ceil(drifts / 2)
    else if (phases > 4) phases = Math.ceil(phases / 2)
    else drifts = Math.ceil(drifts / 2)
  }
  return { step, framesPerStep, phases, drifts, size }
}

/** Scores of all lags of one predicted series; lag l puts light sample 0 on prediction sample l. */
function scanLags(problem: AlignProblem, light: Series, spectrum: { re: Float64Array, im: Float64Array }, predicted: Series, size: number, visit: (lag: number, score: number) => void): void {
  const n = light.values.length
  const m = predicted.values.length
  const re = new Float64Array(size)
  const im = new Float64Array(size)
  re.set(predicted.values)
  fft(re, im)
  for (let k = 0; k < size; k++) {
    const real = re[k] * spectrum.re[k] + im[k] * spectrum.im[k]
    im[k] = im[k] * spectrum.re[k] - re[k] * spectrum.im[k]
    re[k] = real
  }
  inverseFft(re, im)
  const least = Math.max(12, leastOverlap * Math.min(n, m))
  for (let lag = -n + 1; lag < m; lag++) {
    const from = Math.max(0, -lag)
    const to = Math.min(n, m - lag)
    const count = to - from
    if (count < least) continue
    const y = light.sum[to] - light.sum[from]
    const yy = light.squares[to] - light.squares[from]
    const w = predicted.sum[to + lag] - predicted.sum[from + lag]
    const ww = predicted.squares[to + lag] - predicted.squares[from + lag]
    const fit = fitGain(count, w, ww, y, yy, re[(lag + size) % size])
    visit(lag, explained(problem, { ...fit, frames: count }) * problem.light.length / n)
  }
}

/**
 * Every offset at which a useful part of clip and record overlaps (a fifth of the shorter one), by normalised
 * cross-correlation of the measured frame light with the predicted one, for a few drifts and for fractions of a frame.
 *
 * @returns up to `most` candidates, best first, at least half a step apart. Clips so long that drift moves them by many
 *   frames are binned first.
 */
export function coarseCandidates(problem: AlignProblem, most: number): CoarseCandidate[] {
  const { step, framesPerStep, phases, drifts, size } = searchPlan(problem)
  const light = prefixed(uniformLight(problem, step, framesPerStep))
  const spectrum = { re: new Float64Array(size), im: new Float64Array(size) }
  spectrum.re.set(light.values)
  fft(spectrum.re, spectrum.im)
  const window = framesPerStep === 1 ? problem.exposureSeconds : step
  const best = new Map<number, CoarseCandidate>()
  for (let d = 0; d < drifts; d++) {
    const driftPpm = drifts === 1 ? 0 : problem.maxDriftPpm * (2 * (d + 0.5) / drifts - 1)
    const stretched = step * (1 + driftPpm * 1e-6)
    for (let phase = 0; phase < phases; phase++) {
      const start = phase / phases * step
      const length = Math.min(Math.floor((problem.recordSeconds - start - window) / stretched) + 1, size - light.values.length)
      if (length < 2) continue
      const values = new Float64Array(length)
      for (let j = 0; j < length; j++) values[j] = windowMean(problem.integrals, start + j * stretched, window)
      scanLags(problem, light, spectrum, prefixed(values), size, (lag, score) => {
        const middle = lag * stretched + start + driftPpm * 1e-6 * problem.times[problem.times.length - 1] / 2
        const cell = Math.round(middle / step * 2)
        const kept = best.get(cell)
        if (!kept || score > kept.score) best.set(cell, { offsetSeconds: lag * stretched + start, driftPpm, score, stepSeconds: step / phases })
      })
    }
  }
  return separated(best, most)
}

/** A candidate this many nats a frame below the best one cannot win; a few are kept all the same, to compare with. */
const hopeless = 1.5
const fewest = 4

/** The best cells, leaving out those next to a better one. */
function separated(cells: Map<number, CoarseCandidate>, most: number): CoarseCandidate[] {
  const taken = new Set<number>()
  const kept: CoarseCandidate[] = []
  for (const [cell, candidate] of [...cells].sort((a, b) => b[1].score - a[1].score)) {
    if (kept.length >= most || (kept.length >= fewest && candidate.score < kept[0].score - hopeless)) break
    if (!taken.has(cell - 1) && !taken.has(cell + 1)) {
      taken.add(cell)
      kept.push(candidate)
    }
  }
  return kept
}
