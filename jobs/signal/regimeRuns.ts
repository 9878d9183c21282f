import { decimateStretch, type Decimated } from './decimate'
import { computeCells, type RegimeCells } from './regimeCells'
import { fitSine3, fitSine4, SineFitError, type SineFit } from './sineFit'
import { dominantTone, type Tone } from './spectrum'

/** Consecutive cells with one lamp state; the true boundaries lie within two cells of its ends. */
export interface LampRun {
  kind: 'constant' | 'harmonic'
  firstCell: number
  endCell: number
  frequencyHz: number | null
}

export interface RunSearch {
  plannedFrequenciesHz: number[]
  secondsPerCell: number
}

const harmonicSeedCells = 4
const constantSeedCells = 2
const recentCells = 4
/** Modulation below this counts as ripple on a constant lamp, unless its frequency is a planned one. */
const leastDepth = 0.08
const leastPlannedDepth = 0.025
/** No lamp is modulated at less than this share of the highest level; what a tone there would be is pick-up in the dark. */
const dimmestLevel = 0.3

/** Rate at which tones are looked for first. */
const quickHz = 16_000

interface Search {
  samples: Float32Array
  sampleRateHz: number
  cells: RegimeCells
  planned: number[]
}

/**
 * Coarse segmentation: seeds of a few cells that one model fits, grown cell by cell as long as the model, kept local,
 * predicts the next cell. A phase, frequency or level jump ends a run. Stretches that no seed fits are left out.
 */
export function findRuns(samples: Float32Array, sampleRateHz: number, options: RunSearch): { runs: LampRun[], cells: RegimeCells } {
  const cells = computeCells(samples, Math.max(8, Math.round(options.secondsPerCell * sampleRateHz)))
  const search: Search = { samples, sampleRateHz, cells, planned: options.plannedFrequenciesHz }
  const runs: LampRun[] = []
  let cell = 0
  while (cell < cells.count) {
    const run = seed(search, cell)
    if (!run) {
      cell++
      continue
    }
    if (run.kind === 'constant') growConstant(search, run)
    else growHarmonic(search, run)
    runs.push(run)
    cell = run.endCell
  }
  return { runs, cells }
}

function seed(search: Search, cell: number): LampRun | null {
  const { cells } = search
  if (cell + constantSeedCells > cells.count) return null
  const level = Math.max(Math.abs(cells.mean[cell]), 0.05 * cells.scale)
  const harmonic = cleanestSeed(search, cell, Math.max(level, dimmestLevel * cells.scale))
  if (harmonic) return harmonic
  const rough = Math.max(cells.deviation[cell], cells.deviation[cell + 1])
  const steady = Math.abs(cells.mean[cell + 1] - cells.mean[cell]) < 0.02 * cells.scale
  const dim = Math.abs(cells.mean[cell]) < 0.1 * cells.scale
  const quiet = dim
    ? rough < 0.04 * cells.scale || (rough < 0.3 * cells.scale && !hasTone(search, cell, constantSeedCells, 0.06 * cells.scale))
    : rough < 0.06 * level || (rough < 0.3 * level && !hasTone(search, cell, constantSeedCells, leastDepth * level))
  return steady && quiet ? { kind: 'constant', firstCell: cell, endCell: cell + constantSeedCells, frequencyHz: null } : null
}

/** A seed that still holds a little of the regime before has a clearly better one a cell or two later. */
function cleanestSeed(search: Search, cell: number, level: number): LampRun | null {
  let best: { at: number, tone: SineFit } | null = null
  for (let at = cell; at < cell + 3 && at + harmonicSeedCells <= search.cells.count; at++) {
    const tone = seedTone(search, at, level)
    if (!best && !tone) return null
    if (!tone || (best && tone.rmsResidual > 0.7 * best.tone.rmsResidual)) break
    best = { at, tone }
  }
  return best && { kind: 'harmonic', firstCell: best.at, endCell: best.at + harmonicSeedCells, frequencyHz: best.tone.frequencyHz }
}

function stretch(search: Search, cell: number, count: number) {
  return { first: cell * search.cells.samplesPerCell, count: count * search.cells.samplesPerCell }
}

function hasTone(search: Search, cell: number, count: number, amplitude: number): boolean {
  const tone = dominantTone(search.samples, search.sampleRateHz, { ...stretch(search, cell, count), minimumHz: 0 })
  return tone !== null && tone.amplitude > amplitude
}

/** Planned, and not what the mains would put on a constant lamp (twice 50 or 60 Hz). */
function isPlanned(search: Search, frequencyHz: number): boolean {
  const near = (other: number, tolerance: number) => Math.abs(frequencyHz - other) < tolerance
  return search.planned.some(planned => near(planned, Math.max(0.5, 0.01 * planned))) && !near(100, 0.7) && !near(120, 0.7)
}

/**
 * The dominant tone from samples averaged to about 16 kHz, when it explains the deviation of the samples themselves:
 * what folds back from above half of that rate is weakened by the averaging and does not.
 */
function quickTone(search: Search, range: { first: number, count: number }, deviation: number): Tone | null {
  const averaged = decimateStretch(search.samples, search.sampleRateHz, range, quickHz / 20)
  if (averaged.samples.length * 2 > range.count) return null
  const tone = dominantTone(averaged.samples, averaged.sampleRateHz, { first: 0, count: averaged.samples.length })
  return tone && tone.frequencyHz < quickHz / 4 && tone.amplitude / Math.SQRT2 > 0.9 * deviation ? tone : null
}

function seedTone(search: Search, cell: number, level: number): SineFit | null {
  const range = stretch(search, cell, harmonicSeedCells)
  let loudest = 0
  for (let k = cell; k < cell + harmonicSeedCells; k++) loudest = Math.max(loudest, search.cells.deviation[k])
  if (loudest < leastPlannedDepth * level / 2) return null
  const tone = quickTone(search, range, loudest) ?? dominantTone(search.samples, search.sampleRateHz, range)
  if (!tone || tone.amplitude < 0.6 * leastPlannedDepth * level) return null
  const fit = refine(search, tone.frequencyHz, range)
  if (!fit) return null
  const planned = isPlanned(search, fit.frequencyHz)
  if (fit.amplitude < (planned ? leastPlannedDepth : leastDepth) * level) return null
  // A third of the sine's rms leaves room for distortion and noise, but not for a phase jump inside of the seed.
  return fit.rmsResidual < 0.35 * fit.amplitude / Math.SQRT2 ? fit : null
}

/**
 * Amplitude and residual are those of the averaged samples, a percent lower at most. A fit that slid down to less than one
 * and a half cycles in a seed is none: level changes look like that.
 */
function refine(search: Search, guessHz: number, range: { first: number, count: number }): SineFit | null {
  const { samples, sampleRateHz, origin } = decimateStretch(search.samples, search.sampleRateHz, range, guessHz)
  try {
    const fit = fitSine4(samples, sampleRateHz, guessHz, { origin })
    return fit.frequencyHz * harmonicSeedCells * search.cells.samplesPerCell < 1.5 * search.sampleRateHz ? null : fit
  } catch (error) {
    if (error instanceof SineFitError) return null
    throw error
  }
}

function growConstant(search: Search, run: LampRun): void {
  const { mean, deviation, count, scale } = search.cells
  while (run.endCell < count) {
    const next = run.endCell
    const from = Math.max(run.firstCell, next - recentCells)
    let level = 0
    let rough = 0
    for (let k = from; k < next; k++) {
      level += mean[k] / (next - from)
      rough += deviation[k] / (next - from)
    }
    if (Math.abs(mean[next] - level) > 0.02 * scale + rough / 2) return
    if (deviation[next] > Math.max(2 * rough, 0.012 * scale)) return
    run.endCell++
  }
}

function growHarmonic(search: Search, run: LampRun): void {
  const { cells } = search
  let refineAt = 2 * (run.endCell - run.firstCell)
  while (run.endCell < cells.count) {
    const recent = Math.max(run.firstCell, run.endCell - recentCells)
    const known = decimateStretch(search.samples, search.sampleRateHz, stretch(search, recent, run.endCell - recent), run.frequencyHz!)
    const model = fitSine3(known.samples, known.sampleRateHz, run.frequencyHz!, known)
    const next = decimateStretch(search.samples, search.sampleRateHz, stretch(search, run.endCell, 1), run.frequencyHz!)
    if (rmsError(model, next) > Math.max(2 * model.rmsResidual, 0.12 * model.amplitude)) return
    run.endCell++
    if (run.endCell - run.firstCell >= refineAt) {
      const better = refine(search, run.frequencyHz!, stretch(search, run.firstCell, run.endCell - run.firstCell))
      if (better) run.frequencyHz = better.frequencyHz
      refineAt *= 2
    }
  }
}

/** rms of samples minus model. */
function rmsError(model: SineFit, { samples, sampleRateHz, origin }: Decimated): number {
  const radiansPerSample = 2 * Math.PI * model.frequencyHz / sampleRateHz
  let squares = 0
  for (let i = 0; i < samples.length; i++) {
    const angle = radiansPerSample * (origin + i)
    const error = samples[i] - model.offset - model.sine * Math.sin(angle) - model.cosine * Math.cos(angle)
    squares += error * error
  }
  return Math.sqrt(squares / samples.length)
}
