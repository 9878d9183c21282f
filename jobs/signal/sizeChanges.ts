/** A frame at which the compressed size of the frames changes. */
export interface SizeChange {
  /** First frame of the new kind. */
  frame: number
  /** |Δ| of the mean logarithm of the sizes on both sides over its median over the clip. */
  strength: number
}

/** Frames on each side that are compared: longer than a mini group of pictures, shorter than any regime. */
const side = 12

/**
 * Where the compressed size of a clip's frames changes: a lamp that goes on or off, or steps, changes what the encoder has
 * to spend, so that edges show without decoding a frame. Only a hint of where to look: it tells nothing of light.
 *
 * @param packetBytes compressed size of each frame in display order
 * @param keyFrames numbers of the key frames, whose sizes say nothing unless all frames are key frames
 * @returns changes of at least `leastStrength` (default 8: scatter alone reaches about 6), strongest first, at least 2·12 frames apart; none for clips
 *   shorter than that or of constant frame size
 */
export function findSizeChanges(packetBytes: ArrayLike<number>, keyFrames: ArrayLike<number>, leastStrength = 8): SizeChange[] {
  const count = packetBytes.length
  if (count < 4 * side) return []
  const keys = new Set(Array.from(keyFrames))
  const sums = new Float64Array(count + 1)
  const counted = new Int32Array(count + 1)
  for (let k = 0; k < count; k++) {
    const use = keys.size < count && keys.has(k) ? 0 : 1
    sums[k + 1] = sums[k] + use * Math.log(Math.max(1, packetBytes[k]))
    counted[k + 1] = counted[k] + use
  }
  const meanOf = (from: number, to: number) => (sums[to] - sums[from]) / Math.max(1, counted[to] - counted[from])
  const steps = Float64Array.from({ length: count }, (_, k) => k < side || k + side > count ? 0 : Math.abs(meanOf(k, k + side) - meanOf(k - side, k)))
  const usual = steps.slice().sort()[count >> 1] + 1e-3
  const order = [...steps.keys()].filter(k => steps[k] >= leastStrength * usual).sort((a, b) => steps[b] - steps[a])
  const found: SizeChange[] = []
  for (const frame of order) {
    if (found.length >= 64) break
    if (found.every(other => Math.abs(other.frame - frame) >= 2 * side)) found.push({ frame, strength: steps[frame] / usual })
  }
  return found
}
