import type { RegimeCells } from './regimeCells'
import type { LampRun } from './regimeRuns'
import { fitSine3 } from './sineFit'

/** A run with its boundaries at sample precision: samples [first, end) follow its model. */
export interface LampStretch {
  kind: 'constant' | 'harmonic'
  frequencyHz: number | null
  first: number
  end: number
  /** Lamp settling that was cut off in front of `first`, in samples. */
  settlingSamples: number
}

interface LocalModel {
  offset: number
  sine: number
  cosine: number
  radiansPerSample: number
  rmsResidual: number
}

const modelCells = 6
/** Beyond this many seconds of unexplained signal both sides are located on their own. */
const longestJointGapSeconds = 4

/** Model of a run near one of its ends, from the cells beside the outermost one. */
function localModel(samples: Float32Array, sampleRateHz: number, run: LampRun, cells: RegimeCells, side: 'start' | 'end'): LocalModel {
  const margin = run.endCell - run.firstCell >= 4 ? 1 : 0
  const from = side === 'start' ? run.firstCell + margin : Math.max(run.firstCell + margin, run.endCell - margin - modelCells)
  const to = side === 'start' ? Math.min(run.endCell - margin, from + modelCells) : run.endCell - margin
  const first = from * cells.samplesPerCell
  const count = (to - from) * cells.samplesPerCell
  if (run.frequencyHz !== null) {
    const fit = fitSine3(samples, sampleRateHz, run.frequencyHz, { first, count })
    return { offset: fit.offset, sine: fit.sine, cosine: fit.cosine, radiansPerSample: 2 * Math.PI * run.frequencyHz / sampleRateHz, rmsResidual: fit.rmsResidual }
  }
  let mean = 0
  for (let k = from; k < to; k++) mean += cells.mean[k] / (to - from)
  let squares = 0
  for (let k = from; k < to; k++) squares += cells.deviation[k] ** 2 / (to - from)
  return { offset: mean, sine: 0, cosine: 0, radiansPerSample: 0, rmsResidual: Math.sqrt(squares) }
}

function squaredErrors(samples: Float32Array, model: LocalModel, first: number, end: number): Float64Array {
  const errors = new Float64Array(end - first)
  for (let i = first; i < end; i++) {
    let value = model.offset
    if (model.radiansPerSample > 0) {
      const angle = model.radiansPerSample * i
      value += model.sine * Math.sin(angle) + model.cosine * Math.cos(angle)
    }
    errors[i - first] = (samples[i] - value) ** 2
  }
  return errors
}

/**
 * Best division of a stretch into left model, nothing, right model.
 *
 * Minimises Σ left² over [0, leftEnd) + cost · (rightStart − leftEnd) + Σ right² over [rightStart, n), leftEnd ≤
 * rightStart, exactly and in one pass. A null model claims no sample.
 */
export function splitByFit(left: Float64Array | null, right: Float64Array | null, length: number, cost: number): { leftEnd: number, rightStart: number } {
  let leftSum = 0
  let rightSum = 0
  let bestLeft = 0
  let bestLeftSum = 0
  let best = Number.POSITIVE_INFINITY
  let answer = { leftEnd: 0, rightStart: length }
  for (let i = 0; i <= length; i++) {
    if (leftSum < bestLeftSum && left) {
      bestLeftSum = leftSum
      bestLeft = i
    }
    const total = bestLeftSum - rightSum
    if (total < best && (right || i === length)) {
      best = total
      answer = { leftEnd: bestLeft, rightStart: i }
    }
    if (i === length) break
    leftSum += left ? left[i] - cost : 0
    rightSum += right ? right[i] - cost : 0
  }
  return answer
}

/** Did the lamp approach the right model through the gap (settling), rather than stay away from it (a dark gap)? */
function isSettling(rightErrors: Float64Array, from: number, to: number, level: number): boolean {
  const quarter = Math.max(1, Math.floor((to - from) / 4))
  const rms = (start: number) => {
    let squares = 0
    for (let i = start; i < start + quarter; i++) squares += rightErrors[i]
    return Math.sqrt(squares / quarter)
  }
  const early = rms(from)
  const late = rms(to - quarter)
  return late < 0.7 * early && late < 0.3 * level
}

/**
 * Move the coarse ends of runs to the sample at which the fit changes sides.
 *
 * Between neighbours the summed squared error of the left model before and the right model after is minimised over the
 * split sample; samples that neither explains (short dark gaps, settling) fall between. Precise to a few samples for
 * jumps well above the noise; models are local, so slow drift of level or depth does not matter.
 */
export function refineBoundaries(samples: Float32Array, sampleRateHz: number, runs: LampRun[], cells: RegimeCells): LampStretch[] {
  const per = cells.samplesPerCell
  const stretches: LampStretch[] = runs.map(run => ({
    kind: run.kind, frequencyHz: run.frequencyHz, first: run.firstCell * per, end: run.endCell * per, settlingSamples: 0,
  }))
  const refine = (leftIndex: number | null, rightIndex: number | null, from: number, to: number) => {
    const left = leftIndex === null ? null : localModel(samples, sampleRateHz, runs[leftIndex], cells, 'end')
    const right = rightIndex === null ? null : localModel(samples, sampleRateHz, runs[rightIndex], cells, 'start')
    const noise = Math.max(left?.rmsResidual ?? 0, right?.rmsResidual ?? 0)
    const cost = Math.max(9 * noise ** 2, (0.04 * cells.scale) ** 2)
    const rightErrors = right && squaredErrors(samples, right, from, to)
    const split = splitByFit(left && squaredErrors(samples, left, from, to), rightErrors, to - from, cost)
    if (leftIndex !== null) stretches[leftIndex].end = from + split.leftEnd
    if (rightIndex === null || !right || !rightErrors) return
    stretches[rightIndex].first = from + split.rightStart
    const gap = split.rightStart - split.leftEnd
    if (gap > 0.002 * sampleRateHz && isSettling(rightErrors, split.leftEnd, split.rightStart, Math.abs(right.offset))) {
      stretches[rightIndex].settlingSamples = gap
    }
  }
  const inside = (run: LampRun) => Math.min(2, Math.floor((run.endCell - run.firstCell) / 2)) * per
  const reach = Math.round(longestJointGapSeconds / 2 * sampleRateHz)
  for (let index = 0; index <= runs.length; index++) {
    const left = index > 0 ? runs[index - 1] : null
    const right = index < runs.length ? runs[index] : null
    const from = left ? left.endCell * per - inside(left) : 0
    const to = right ? right.firstCell * per + inside(right) : samples.length
    if (left && right && to - from <= 2 * reach + 4 * per) {
      refine(index - 1, index, from, to)
      continue
    }
    if (left) refine(index - 1, null, from, Math.min(to, from + reach))
    if (right) refine(null, index, Math.max(from, to - reach), to)
  }
  return stretches
}
