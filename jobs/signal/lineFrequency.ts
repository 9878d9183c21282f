import { fitSine3, fitSine4, frequencyDeviationHz, SineFitError, wrapDegrees, type SineFit } from './sineFit'

export interface HarmonicStretch {
  /** Samples of the stretch alone, at a rate of its own. */
  samples: ArrayLike<number>
  sampleRateHz: number
  /** Position of element 0 on the record's axis of that rate. */
  origin: number
  guessHz: number
}

export interface LineFrequency {
  frequencyHz: number
  deviationHz: number
  /** Indices of the stretches that share it. */
  members: number[]
}

interface Single {
  index: number
  fit: SineFit
  deviationHz: number
}

function fitEach(stretches: HarmonicStretch[]): Single[] {
  return stretches.map((stretch, index) => {
    let fit: SineFit
    try {
      fit = fitSine4(stretch.samples, stretch.sampleRateHz, stretch.guessHz, stretch)
    } catch (error) {
      if (!(error instanceof SineFitError)) throw error
      fit = fitSine3(stretch.samples, stretch.sampleRateHz, stretch.guessHz, stretch)
    }
    return { index, fit, deviationHz: Math.max(frequencyDeviationHz(fit, stretch.samples.length, stretch.sampleRateHz), 1e-9 * fit.frequencyHz) }
  })
}

/** Inverse-variance mean of the stretches' own frequencies. */
function pool(group: Single[]): { frequencyHz: number, deviationHz: number } {
  let weights = 0
  let sum = 0
  for (const single of group) {
    const weight = single.deviationHz ** -2
    weights += weight
    sum += weight * (single.fit.frequencyHz - group[0].fit.frequencyHz)
  }
  return { frequencyHz: group[0].fit.frequencyHz + sum / weights, deviationHz: weights ** -0.5 }
}

/** Stretches whose phases belong together: greedy classes of 25° half width. */
function phaseClasses(phases: { time: number, phaseDeg: number }[]): { time: number, phaseDeg: number }[][] {
  const classes: { time: number, phaseDeg: number }[][] = []
  for (const entry of phases) {
    const home = classes.find(members => Math.abs(wrapDegrees(members[0].phaseDeg - entry.phaseDeg)) < 25)
    if (home) home.push({ time: entry.time, phaseDeg: home[0].phaseDeg + wrapDegrees(entry.phaseDeg - home[0].phaseDeg) })
    else classes.push([{ ...entry }])
  }
  return classes
}

/**
 * Sharpen a pooled frequency by the phases' drift across repetitions: stretches of one phase setting must keep their
 * phase. Used only when the pooled frequency is good enough to count whole cycles between them and the result agrees
 * with it; otherwise (generator restarted between regimes) the pooled one stays.
 */
function sharpen(stretches: HarmonicStretch[], group: Single[], pooled: { frequencyHz: number, deviationHz: number }) {
  const middles = group.map(({ index }) => (stretches[index].origin + (stretches[index].samples.length - 1) / 2) / stretches[index].sampleRateHz)
  const centre = middles.reduce((sum, time) => sum + time, 0) / middles.length
  const span = Math.max(...middles) - Math.min(...middles)
  if (pooled.deviationHz * span * 360 > 6) return pooled
  const phases = group.map((single, k) => {
    const stretch = stretches[single.index]
    const fit = fitSine3(stretch.samples, stretch.sampleRateHz, pooled.frequencyHz, stretch)
    // Phase at the line's middle, so that the lever from sample 0 is not in it.
    return { time: middles[k] - centre, phaseDeg: wrapDegrees(fit.phaseDeg + 360 * ((pooled.frequencyHz * centre) % 1)) }
  })
  let numerator = 0
  let denominator = 0
  let squares = 0
  let freedom = -1
  const classes = phaseClasses(phases)
  const centred = classes.map((members) => {
    const time = members.reduce((sum, entry) => sum + entry.time, 0) / members.length
    const phase = members.reduce((sum, entry) => sum + entry.phaseDeg, 0) / members.length
    freedom += members.length - 1
    return members.map(entry => ({ time: entry.time - time, phaseDeg: entry.phaseDeg - phase }))
  }).flat()
  for (const entry of centred) {
    numerator += entry.time * entry.phaseDeg
    denominator += entry.time * entry.time
  }
  if (freedom < 0 || denominator === 0) return pooled
  const slope = numerator / denominator
  for (const entry of centred) squares += (entry.phaseDeg - slope * entry.time) ** 2
  const own = Math.max(...group.map(single => Math.SQRT2 * single.fit.rmsResidual / single.fit.amplitude / Math.sqrt(stretches[single.index].samples.length)))
  const scatterDeg = Math.max(freedom > 0 ? Math.sqrt(squares / freedom) : 0, own * 180 / Math.PI)
  const deviationHz = scatterDeg / 360 / Math.sqrt(denominator)
  const change = slope / 360
  if (Math.abs(change) > 6 * pooled.deviationHz || scatterDeg > 2 || deviationHz > pooled.deviationHz) return pooled
  return { frequencyHz: pooled.frequencyHz + change, deviationHz }
}

/**
 * The frequencies that a record's harmonic stretches share.
 *
 * Each stretch is fitted with four parameters; stretches within 0.05 Hz (or 1e-4 of the frequency, or six standard
 * deviations) form a line, whose frequency is the inverse-variance mean, sharpened by the phases' drift across
 * repetitions where the lamp is coherent. All groups of a line must use one ω: an error δf turns the phase between two
 * groups τ apart by 360·δf·τ degrees.
 *
 * @param plannedFrequenciesHz a line that cannot be told from a planned frequency (four standard deviations) takes it
 * @returns lines in order of frequency
 */
export function findLineFrequencies(stretches: HarmonicStretch[], plannedFrequenciesHz: number[] = []): LineFrequency[] {
  const singles = fitEach(stretches).sort((a, b) => a.fit.frequencyHz - b.fit.frequencyHz)
  const groups: Single[][] = []
  for (const single of singles) {
    const last = groups.at(-1)?.at(-1)
    const tolerance = last ? Math.max(0.05, 1e-4 * single.fit.frequencyHz, 6 * Math.hypot(last.deviationHz, single.deviationHz)) : 0
    if (last && single.fit.frequencyHz - last.fit.frequencyHz < tolerance) groups.at(-1)!.push(single)
    else groups.push([single])
  }
  return groups.map((group) => {
    const line = sharpen(stretches, group, pool(group))
    const planned = plannedFrequenciesHz.find(frequency => Math.abs(frequency - line.frequencyHz) < 4 * line.deviationHz)
    return { frequencyHz: planned ?? line.frequencyHz, deviationHz: line.deviationHz, members: group.map(single => single.index).sort((a, b) => a - b) }
  })
}
