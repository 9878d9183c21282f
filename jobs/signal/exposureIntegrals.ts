import type { FrameTiming, LightIntegrals } from './lightPrediction'
import { recordTimeOf } from './lightPrediction'

export interface ExposureIntegrals {
  A: number
  C: number
  S: number
}

/** Integral over [i, i + part], 0 ≤ part ≤ 1, of the cubic through g(i−1), g(i), g(i+1), g(i+2). */
function cubicPart(before: number, here: number, next: number, after: number, part: number): number {
  const c1 = -before / 3 - here / 2 + next - after / 6
  const c2 = (before + next) / 2 - here
  const c3 = (after - before) / 6 + (here - next) / 2
  return part * (here + part * (c1 / 2 + part * (c2 / 3 + part * c3 / 4)))
}

/**
 * Integrals of L, L·cos ωt and L·sin ωt (in unit × samples) over samples [from, to] of the record, positions real.
 *
 * The products are interpolated by a cubic through four samples: the error of a harmonic sampled eight times a period
 * is below 0.1 % of one sample's worth at the two ends and cancels in between. At the record's ends the edge sample repeats.
 */
function integrateProducts(integrals: LightIntegrals, from: number, to: number, radiansPerSample: number): [number, number, number] {
  const { illumination, darkLevel } = integrals
  const last = illumination.length - 1
  const begin = Math.floor(from)
  const finish = Math.min(Math.floor(to), last - 1)
  const total: [number, number, number] = [0, 0, 0]
  const size = finish - begin + 4
  const g = [new Float64Array(size), new Float64Array(size), new Float64Array(size)]
  for (let k = 0; k < size; k++) {
    const i = Math.min(Math.max(begin - 1 + k, 0), last)
    const light = illumination[i] - darkLevel
    const angle = radiansPerSample * i
    g[0][k] = light
    g[1][k] = light * Math.cos(angle)
    g[2][k] = light * Math.sin(angle)
  }
  for (let n = 0; n < 3; n++) {
    const v = g[n]
    const parts = (k: number, part: number) => cubicPart(v[k - 1], v[k], v[k + 1], v[k + 2], part)
    let sum = -parts(1, from - begin)
    for (let k = 1; k < size - 3; k++) sum += (13 * (v[k] + v[k + 1]) - v[k - 1] - v[k + 2]) / 24
    total[n] = sum + parts(size - 3, to - finish)
  }
  return total
}

/**
 * A, C and S of a group of frames: Σ over its frames of (1/T_e)∫ L dt, (1/T_e)∫ L cos ωt dt, (1/T_e)∫ L sin ωt dt.
 *
 * @param integrals of the illumination channel, with the dark level that is to be subtracted
 * @param timing frame times (clip time), exposure, offset and drift: record time = offset + (1 + drift)·clip time
 * @param group line frequency in Hz, first frame, number of frames
 * @returns A, C, S in record units; t = 0 is the record's first sample. NaN when a window leaves the record.
 * Source: measured exposure integrals of the linear model I_g = A·s + C·p + S·q (method description, section 1).
 */
export function exposureIntegrals(integrals: LightIntegrals, timing: FrameTiming, group: { frequencyHz: number, firstFrame: number, frameCount: number }): ExposureIntegrals {
  const { sampleRateHz, illumination } = integrals
  const last = illumination.length - 1
  const radiansPerSample = 2 * Math.PI * group.frequencyHz / sampleRateHz
  const sums = { A: 0, C: 0, S: 0 }
  for (let frame = group.firstFrame; frame < group.firstFrame + group.frameCount; frame++) {
    const start = recordTimeOf(timing, frame)
    const from = start * sampleRateHz
    const to = (start + timing.exposureSeconds) * sampleRateHz
    if (!(from >= -1e-6 && to <= last + 1e-6)) return { A: Number.NaN, C: Number.NaN, S: Number.NaN }
    const [light, cos, sin] = integrateProducts(integrals, Math.max(from, 0), Math.min(to, last), radiansPerSample)
    const width = to - from
    sums.A += light / width
    sums.C += cos / width
    sums.S += sin / width
  }
  return sums
}
