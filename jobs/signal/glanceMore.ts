import type { AlignResult } from './align'
import type { GlancePlan } from './glance'
import { createLightIntegrals, predictFrameLight } from './lightPrediction'

export interface GlanceMoreInput {
  /** What has been measured so far, NaN elsewhere. */
  frameLight: Float64Array
  frameTimesSeconds: Float64Array
  keyFrames: ArrayLike<number>
  exposureSeconds: number
  illumination: Float32Array
  sampleRateHz: number
  darkLevel: number | null
  /** Share of the clip's frames that may be decoded this time, default 0.015. */
  share?: number
  /** Frames that may be decoded whatever the share, default 80. */
  leastFrames?: number
}

/** Two alignments are told apart by this much, and no single frame gives more than a third of it. */
const enoughNats = 240

/**
 * Where to look again when `alignClip` is not sure after a glance: for each alignment that fits nearly as well as the best
 * one, the cheapest window (decoded from its key frame) in which the two predict different light, as at a lamp edge that
 * comes right after a key frame. Measure these frames, put them into `frameLight` and call `alignClip` again.
 *
 * @param result of `alignClip` with the light so far
 * @returns no windows when there is nothing to choose between, or nothing within the budget tells it apart
 */
export function planMoreWindows(input: GlanceMoreInput, result: AlignResult): GlancePlan {
  const frames = input.frameTimesSeconds.length
  const budget = Math.max(input.leastFrames ?? 80, Math.floor((input.share ?? 0.015) * frames))
  const contenders = result.contenders ?? []
  const integrals = createLightIntegrals(input.illumination, input.sampleRateHz, input.darkLevel)
  const predictions = contenders.map(contender => predictFrameLight(integrals, { ...input, ...contender }).map(mean => contender.gain * mean + contender.background))
  const noise = noiseOf(input.frameLight, result.predicted)
  const windows: GlancePlan['windows'] = []
  let left = budget
  for (const other of predictions.slice(1)) {
    const difference = differences(predictions[0], other, noise)
    let told = 0
    for (const { firstFrame, frameCount } of windows) for (let k = firstFrame; k < firstFrame + frameCount; k++) told += difference[k]
    if (told >= enoughNats) continue
    const window = cheapest(difference, input.keyFrames, input.frameLight, left)
    if (!window) continue
    windows.push(window)
    left -= window.frameCount
  }
  return { useKeyFrames: false, windows: joined(windows), decodedFrames: budget - left }
}

/** Rms of the best fit, at least 0.5 % of the span of light. */
function noiseOf(light: Float64Array, predicted: Float64Array): number {
  let squares = 0, count = 0, lowest = Number.POSITIVE_INFINITY, highest = Number.NEGATIVE_INFINITY
  for (let k = 0; k < light.length; k++) {
    lowest = Math.min(lowest, light[k] || lowest)
    highest = Math.max(highest, light[k] || highest)
    const error = light[k] - predicted[k]
    if (Number.isNaN(error)) continue
    squares += error * error
    count++
  }
  return Math.max(Math.sqrt(squares / Math.max(1, count)), 0.005 * (highest - lowest), Number.MIN_VALUE)
}

/** What each frame would tell in nats; a frame that one of the two puts outside of the record tells nothing. */
function differences(one: Float64Array, other: Float64Array, noise: number): Float64Array {
  return one.map((value, k) => {
    const nats = (value - other[k]) ** 2 / (2 * noise * noise)
    return Number.isNaN(nats) ? 0 : Math.min(nats, enoughNats / 3)
  })
}

/** The shortest window from a key frame that tells enough, else the one that tells most. */
function cheapest(difference: Float64Array, keyFrames: ArrayLike<number>, measured: Float64Array, mostFrames: number): { firstFrame: number, frameCount: number } | null {
  let best = { firstFrame: 0, frameCount: Number.POSITIVE_INFINITY }
  let most = { firstFrame: 0, frameCount: 0, told: 0 }
  for (let entry = 0; entry < keyFrames.length; entry++) {
    const firstFrame = keyFrames[entry]
    let told = 0
    for (let k = firstFrame; k < Math.min(difference.length, firstFrame + Math.min(mostFrames, best.frameCount - 1)); k++) {
      if (Number.isNaN(measured[k])) told += difference[k]
      const frameCount = Math.min(k + 3, difference.length) - firstFrame
      if (told > most.told * 1.2 && frameCount <= mostFrames) most = { firstFrame, frameCount, told }
      if (told < enoughNats) continue
      if (frameCount <= mostFrames) best = { firstFrame, frameCount }
      break
    }
  }
  if (Number.isFinite(best.frameCount)) return best
  return most.told > enoughNats / 8 ? { firstFrame: most.firstFrame, frameCount: most.frameCount } : null
}

/** In order, those that touch made one. */
function joined(windows: GlancePlan['windows']): GlancePlan['windows'] {
  const out: GlancePlan['windows'] = []
  for (const window of windows.sort((a, b) => a.firstFrame - b.firstFrame)) {
    const last = out.at(-1)
    if (last && window.firstFrame <= last.firstFrame + last.frameCount) last.frameCount = Math.max(last.frameCount, window.firstFrame + window.frameCount - last.firstFrame)
    else out.push({ ...window })
  }
  return out
}
