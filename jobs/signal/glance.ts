/** What a glance decodes: the key frames on their own, or not, and stretches of frames, each from the key frame it begins with. */
export interface GlancePlan {
  useKeyFrames: boolean
  windows: { firstFrame: number, frameCount: number }[]
  /** Frames decoded for it in all. */
  decodedFrames: number
}

export interface GlanceInput {
  frameTimesSeconds: ArrayLike<number>
  /** Numbers of the key frames, rising. */
  keyFrames: ArrayLike<number>
  /** Share of the clip's frames that may be decoded, default 0.025: `planMoreWindows` may want as many again. */
  share?: number
  /** Frames that may be decoded whatever the share, default 120. */
  leastFrames?: number
}

/** Longer clips gain nothing from more. */
const mostFrames = 900
/** Seconds that a window should last, so that it sees the lamp change now and then. */
const windowSeconds = 1.2

/**
 * Which frames of a clip to measure for a first alignment: all key frames where they are few (they tell dark from light all
 * over the clip), and windows spread over it, each beginning with a key frame so that no frame is decoded in vain.
 *
 * Give `alignClip` a `frameLight` that is NaN everywhere else.
 */
export function planGlance(input: GlanceInput): GlancePlan {
  const { keyFrames } = input
  const frames = input.frameTimesSeconds.length
  const budget = Math.min(frames, mostFrames, Math.max(input.leastFrames ?? 120, Math.floor((input.share ?? 0.025) * frames)))
  const useKeyFrames = keyFrames.length <= budget / 3
  const left = budget - (useKeyFrames ? keyFrames.length : 0)
  const frameSeconds = (input.frameTimesSeconds[frames - 1] - input.frameTimesSeconds[0]) / Math.max(1, frames - 1)
  const count = Math.max(2, Math.min(8, Math.round(left * frameSeconds / windowSeconds), keyFrames.length))
  const length = Math.floor(left / count)
  const windows: GlancePlan['windows'] = []
  for (let w = 0; w < count; w++) {
    const wanted = (w + 0.5) / count * frames - length / 2
    let firstFrame = keyFrames[0] ?? 0
    for (let k = 0; k < keyFrames.length; k++) if (Math.abs(keyFrames[k] - wanted) < Math.abs(firstFrame - wanted)) firstFrame = keyFrames[k]
    const last = windows.at(-1)
    if (last && firstFrame < last.firstFrame + last.frameCount) last.frameCount = Math.min(frames, firstFrame + length) - last.firstFrame
    else windows.push({ firstFrame, frameCount: Math.min(length, frames - firstFrame) })
  }
  return { useKeyFrames, windows, decodedFrames: (useKeyFrames ? keyFrames.length : 0) + windows.reduce((sum, { frameCount }) => sum + frameCount, 0) }
}

/** The light of the frames that a plan measures, NaN elsewhere: what the caller has after a glance, made from complete light. */
export function glancedLight(frameLight: Float64Array, keyFrames: ArrayLike<number>, plan: GlancePlan): Float64Array {
  const light = new Float64Array(frameLight.length).fill(Number.NaN)
  if (plan.useKeyFrames) for (let k = 0; k < keyFrames.length; k++) light[keyFrames[k]] = frameLight[keyFrames[k]]
  for (const { firstFrame, frameCount } of plan.windows) light.set(frameLight.subarray(firstFrame, firstFrame + frameCount), firstFrame)
  return light
}
