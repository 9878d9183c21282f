export interface ExposureRun {
  /** Record time at which each frame's exposure starts. */
  startsSeconds: Float64Array
  exposureSeconds: number
  frequencyHz: number
  /** Modulation depth, weighs the second harmonic; 0 for a constant lamp. */
  depth: number
}

export interface PeriodChoice {
  first: number
  count: number
  /** Whole-period error of the choice, and of all frames: see `chooseWholePeriods`. */
  error: number
  errorOfAll: number
}

/** Up to so many frames to trim all choices are tried (a million); of more, every n-th, then those around the best. */
const mostTrimmed = 1400

/** Running sums of (1/T_e)∫ e^{jωt} dt over the frames' windows. */
function runningPhasor(run: ExposureRun, frequencyHz: number) {
  const count = run.startsSeconds.length
  const re = new Float64Array(count + 1)
  const im = new Float64Array(count + 1)
  const x = Math.PI * frequencyHz * run.exposureSeconds
  const weight = x === 0 ? 1 : Math.sin(x) / x
  for (let k = 0; k < count; k++) {
    const cycles = frequencyHz * (run.startsSeconds[k] + run.exposureSeconds / 2)
    const angle = 2 * Math.PI * (cycles - Math.floor(cycles))
    re[k + 1] = re[k] + weight * Math.cos(angle)
    im[k + 1] = im[k] + weight * Math.sin(angle)
  }
  return { re, im }
}

/**
 * The contiguous part of a group, at least `leastShare` of its frames, whose whole-period error is least.
 *
 * The whole-period error is what the windows, dead time included, let through where whole periods would give zero:
 * (|Σ⟨e^{jωt}⟩| + (m/2)·|Σ⟨e^{2jωt}⟩|) / n, ⟨ ⟩ the mean over an exposure. For a gap-free row of exposures it is the
 * Dirichlet kernel's leakage; it is 0 when the exposures cover whole periods. Errors below 1e-5 count as equal; of equal
 * choices the longest, then the earliest, is taken. Groups of more than 14 000 frames are searched on a grid and then around
 * its best point, which may miss the optimum by little.
 */
export function chooseWholePeriods(run: ExposureRun, leastShare = 0.9): PeriodChoice {
  const total = run.startsSeconds.length
  const single = runningPhasor(run, run.frequencyHz)
  const double = runningPhasor(run, 2 * run.frequencyHz)
  const errorOf = (from: number, to: number) =>
    (Math.sqrt((single.re[to] - single.re[from]) ** 2 + (single.im[to] - single.im[from]) ** 2)
      + run.depth / 2 * Math.sqrt((double.re[to] - double.re[from]) ** 2 + (double.im[to] - double.im[from]) ** 2)) / (to - from)
  const errorOfAll = total > 0 ? errorOf(0, total) : 0
  const choice = { first: 0, count: total, error: errorOfAll, errorOfAll }
  const least = Math.max(1, Math.ceil(leastShare * total))
  let best = Math.max(errorOfAll, 1e-5)
  const search = (counts: [number, number], firsts: [number, number], step: number) => {
    for (let count = Math.min(counts[1], total - 1); count >= Math.max(counts[0], least); count -= step) {
      const last = Math.min(firsts[1], total - count)
      for (let first = Math.max(firsts[0], 0); first <= last; first += step) {
        const error = errorOf(first, first + count)
        if (Math.max(error, 1e-5) < best) {
          best = Math.max(error, 1e-5)
          Object.assign(choice, { first, count, error })
        }
      }
    }
  }
  const step = Math.max(1, Math.ceil((total - least) / mostTrimmed))
  search([least, total - 1], [0, total], step)
  if (step > 1) search([choice.count - step, choice.count + step], [choice.first - step, choice.first + step], 1)
  return choice
}
