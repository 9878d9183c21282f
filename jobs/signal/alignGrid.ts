import { fitGain, type AlignProblem, type AlignSolution } from './alignProblem'
import { windowMean } from './lightPrediction'

export interface GridArea {
  /** First frame and end of the frames used. */
  fromFrame: number
  toFrame: number
  middleSeconds: number
  pivotSeconds: number
  /** Half range and step of the record time of the pivot. */
  halfRangeSeconds: number
  stepSeconds: number
  driftPpm: number
  halfRangePpm: number
}

const sumsPerCell = 6

/**
 * Joint grid over the pivot's record time and drift.
 *
 * Frames are put into segments so short that drift moves nothing inside one by more than a step; the sums of a segment at
 * every shift are made once, so that one point of the grid costs a look-up per segment.
 *
 * @returns the local minima of squared error per covered frame, best first, at most `most`
 */
export function searchGrid(problem: AlignProblem, area: GridArea, most: number): AlignSolution[] {
  const { times } = problem
  const span = Math.max(times[area.toFrame - 1] - times[area.fromFrame], problem.frameSeconds)
  const driftRange = area.halfRangePpm * 1e-6
  const segmentSeconds = driftRange > 0 ? Math.max(2 * area.stepSeconds / driftRange, problem.frameSeconds) : span
  const reach = Math.ceil((area.halfRangeSeconds + driftRange * span / 2) / area.stepSeconds) + 1
  const segments = makeSegments(problem, area, segmentSeconds, reach)
  const steps = Math.ceil(area.halfRangeSeconds / area.stepSeconds)
  const driftSteps = driftRange > 0 ? Math.ceil(driftRange * span / 2 / area.stepSeconds) : 0
  const width = 2 * steps + 1
  const surface = new Float64Array(width * (2 * driftSteps + 1)).fill(Number.POSITIVE_INFINITY)
  const point = (row: number, column: number): AlignSolution => {
    const drift = driftSteps > 0 ? driftRange * (row - driftSteps) / driftSteps : 0
    return evaluate(segments, reach, area, column - steps, drift)
  }
  for (let row = 0; row <= 2 * driftSteps; row++) {
    for (let column = 0; column < width; column++) {
      const solution = point(row, column)
      if (solution.frames > 8) surface[row * width + column] = solution.squares / solution.frames
    }
  }
  return localMinima(surface, width).slice(0, most).map(index => point(Math.floor(index / width), index % width))
}

interface Segments {
  centres: Float64Array
  /** [segment][shift][n, w, ww, y, yy, wy] */
  sums: Float64Array
  shifts: number
}

function makeSegments(problem: AlignProblem, area: GridArea, segmentSeconds: number, reach: number): Segments {
  const { times, light, integrals, exposureSeconds } = problem
  const start = times[area.fromFrame]
  const count = Math.floor((times[area.toFrame - 1] - start) / segmentSeconds) + 1
  const shifts = 2 * reach + 1
  const sums = new Float64Array(count * shifts * sumsPerCell)
  const centres = Float64Array.from({ length: count }, (_, segment) => start + (segment + 0.5) * segmentSeconds)
  for (let frame = area.fromFrame; frame < area.toFrame; frame++) {
    const segment = Math.min(count - 1, Math.floor((times[frame] - start) / segmentSeconds))
    const y = light[frame]
    const base = area.middleSeconds + (1 + area.driftPpm * 1e-6) * (times[frame] - area.pivotSeconds)
    for (let shift = 0; shift < shifts; shift++) {
      const w = windowMean(integrals, base + (shift - reach) * area.stepSeconds, exposureSeconds)
      if (Number.isNaN(w)) continue
      const at = (segment * shifts + shift) * sumsPerCell
      sums[at]++
      sums[at + 1] += w
      sums[at + 2] += w * w
      sums[at + 3] += y
      sums[at + 4] += y * y
      sums[at + 5] += w * y
    }
  }
  return { centres, sums, shifts }
}

function evaluate(segments: Segments, reach: number, area: GridArea, column: number, drift: number): AlignSolution {
  let n = 0, w = 0, ww = 0, y = 0, yy = 0, wy = 0
  const { sums, centres, shifts } = segments
  for (let segment = 0; segment < centres.length; segment++) {
    const shift = column + Math.round(drift * (centres[segment] - area.pivotSeconds) / area.stepSeconds) + reach
    if (shift < 0 || shift >= shifts) continue
    const at = (segment * shifts + shift) * sumsPerCell
    n += sums[at]
    w += sums[at + 1]
    ww += sums[at + 2]
    y += sums[at + 3]
    yy += sums[at + 4]
    wy += sums[at + 5]
  }
  const fit = fitGain(n, w, ww, y, yy, wy)
  return {
    middleSeconds: area.middleSeconds + column * area.stepSeconds,
    pivotSeconds: area.pivotSeconds,
    driftPpm: area.driftPpm + drift * 1e6,
    frames: n, ...fit,
  }
}

/** Indices of points not above any of their eight neighbours, lowest first. */
function localMinima(surface: Float64Array, width: number): number[] {
  const height = surface.length / width
  const found: number[] = []
  for (let row = 0; row < height; row++) {
    for (let column = 0; column < width; column++) {
      const index = row * width + column
      if (!Number.isFinite(surface[index])) continue
      let lowest = true
      for (let r = Math.max(0, row - 1); lowest && r <= Math.min(height - 1, row + 1); r++) {
        for (let c = Math.max(0, column - 1); c <= Math.min(width - 1, column + 1); c++) {
          if (surface[r * width + c] < surface[index]) {
            lowest = false
            break
          }
        }
      }
      if (lowest) found.push(index)
    }
  }
  return found.sort((a, b) => surface[a] - surface[b])
}
