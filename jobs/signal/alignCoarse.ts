import { sparseScan } from './alignCoarseSparse'
import type { AlignProblem } from './alignProblem'
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
  /** Distance between the drifts searched; all of ± the largest drift when there was one only. */
  driftStepPpm: number
}

interface Series {
  values: Float64Array
  sum: Float64Array
  squares: Float64Array
}

/** Overlap searched, as a share of the shorter one of clip and record. */
const leastOverlap = 0.2
/** Bound on phases × drifts × N·log2 N of the transforms; sparse light has little else than its beat to tell places by. */
const transformBudget = { complete: 4e7, sparse: 2e7 }

function prefixed(values: Float64Array): Series {
  const sum = new Float64Array(values.length + 1)
  const squares = new Float64Array(values.length + 1)
  for (let k = 0; k < values.length; k++) {
    sum[k + 1] = sum[k] + values[k]
    squares[k + 1] = squares[k] + values[k] * values[k]
  }
  return { values, sum, squares }
}

/** Frame light on a uniform grid of `step` seconds (means of the frames in a bin, gaps bridged), mean removed, and which bins have some. */
function uniformLight(problem: AlignProblem, step: number, framesPerStep: number) {
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
  return { values: sums, measured: Uint8Array.from(counts, count => Number(count > 0)) }
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
  const budget = problem.sparse ? transformBudget.sparse : transformBudget.complete
  while (phases * drifts * size * Math.log2(size) > budget && (phases > 4 || drifts > 3)) {
    if (drifts > 3 && drifts >= phases / 2) drifts = Math.ceil(drifts / 2)
    else if (phases > 4) phases = Math.ceil(phases / 2)
    else drifts = Math.ceil(drifts / 2)
  }
  return { step, framesPerStep, phases, drifts, size }
}

interface Scratch {
  re: Float64Array
  im: Float64Array
}

/** Circular cross-correlation of the prediction with the light's spectrum, left in `scratch.re`. */
function correlate(spectrum: Scratch, predicted: Float64Array, scratch: Scratch): void {
  const { re, im } = scratch
  re.fill(0)
  im.fill(0)
  re.set(predicted)
  fft(re, im)
  for (let k = 0; k < re.length; k++) {
    const real = re[k] * spectrum.re[k] + im[k] * spectrum.im[k]
    im[k] = im[k] * spectrum.re[k] - re[k] * spectrum.im[k]
    re[k] = real
  }
  inverseFft(re, im)
}

/** Scores (see `explained`) of all lags of one predicted series; lag l puts light sample 0 on prediction sample l. */
function scanLags(light: Series, predicted: Series, correlation: Float64Array, visit: (lag: number, score: number) => void): void {
  const n = light.values.length
  const m = predicted.values.length
  const size = correlation.length
  const least = Math.max(12, leastOverlap * Math.min(n, m))
  const floor = 1e-6 * light.squares[n] / n + Number.MIN_VALUE
  for (let lag = -n + 1; lag < m; lag++) {
    const from = Math.max(0, -lag)
    const to = Math.min(n, m - lag)
    const count = to - from
    if (count < least) continue
    const y = light.sum[to] - light.sum[from]
    const w = predicted.sum[to + lag] - predicted.sum[from + lag]
    const ww = predicted.squares[to + lag] - predicted.squares[from + lag]
    const sww = ww - w * w / count
    const swy = correlation[lag < 0 ? lag + size : lag] - w * y / count
    if (swy <= 0 || !(sww > 1e-12 * ww)) continue
    const syy = light.squares[to] - light.squares[from] - y * y / count
    visit(lag, 0.5 * count * Math.log((syy + floor * count) / (Math.max(0, syy - swy * swy / sww) + floor * count)) / n)
  }
}

/** As `sparseScan`, for light without gaps: sums of an overlap come from running sums. */
function completeScan(values: Float64Array, size: number) {
  const light = prefixed(values)
  const spectrum = { re: new Float64Array(size), im: new Float64Array(size) }
  spectrum.re.set(values)
  fft(spectrum.re, spectrum.im)
  const scratch = { re: new Float64Array(size), im: new Float64Array(size) }
  return (predicted: Float64Array, visit: (lag: number, score: number) => void) => {
    correlate(spectrum, predicted, scratch)
    scanLags(light, prefixed(predicted), scratch.re, visit)
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
  const light = uniformLight(problem, step, framesPerStep)
  const scan = problem.sparse ? sparseScan(light.values, light.measured, size) : completeScan(light.values, size)
  const window = framesPerStep === 1 ? problem.exposureSeconds : step
  const half = problem.times[problem.times.length - 1] / 2
  // Two cells a step, the first for the earliest offset: the best score in each, and what made it.
  const cells = 2 * size + 8
  const best = { score: new Float64Array(cells).fill(-1), offset: new Float64Array(cells), drift: new Float64Array(cells) }
  for (let d = 0; d < drifts; d++) {
    const driftPpm = drifts === 1 ? 0 : problem.maxDriftPpm * (2 * (d + 0.5) / drifts - 1)
    const stretched = step * (1 + driftPpm * 1e-6)
    for (let phase = 0; phase < phases; phase++) {
      const start = phase / phases * step
      const length = Math.min(Math.floor((problem.recordSeconds - start - window) / stretched) + 1, size - light.values.length)
      if (length < 2) continue
      const values = new Float64Array(length)
      for (let j = 0; j < length; j++) values[j] = windowMean(problem.integrals, start + j * stretched, window)
      scan(values, (lag, score) => {
        const offset = lag * stretched + start
        const cell = Math.min(cells - 1, Math.max(0, Math.round((offset + driftPpm * 1e-6 * half) / step * 2) + 2 * light.values.length + 2))
        if (score <= best.score[cell]) return
        best.score[cell] = score
        best.offset[cell] = offset
        best.drift[cell] = driftPpm
      })
    }
  }
  const candidates: CoarseCandidate[] = []
  for (const cell of separated(best.score, most)) {
    candidates.push({ offsetSeconds: best.offset[cell], driftPpm: best.drift[cell], score: best.score[cell], stepSeconds: step / phases, driftStepPpm: 2 * problem.maxDriftPpm / drifts })
  }
  return candidates
}

/** A candidate this many nats a frame below the best one cannot win; a few are kept all the same, to compare with. */
const hopeless = 1.5
const fewest = 4

/** The best cells, leaving out those next to a better one. */
function separated(score: Float64Array, most: number): number[] {
  const order = Array.from(score.keys()).filter(cell => score[cell] >= 0).sort((a, b) => score[b] - score[a])
  const kept: number[] = []
  const taken = new Set<number>()
  for (const cell of order) {
    if (kept.length >= most || (kept.length >= fewest && score[cell] < score[kept[0]] - hopeless)) break
    if (taken.has(cell - 1) || taken.has(cell + 1)) continue
    taken.add(cell)
    kept.push(cell)
  }
  return kept
}
