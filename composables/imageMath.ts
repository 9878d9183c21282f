/** Images as they come from the API: row-major values, and what turns a value into light. */
export interface RawImage { values: Float32Array | Uint32Array, rows: number, columns: number }
export interface ImageStatistics {
  minimum: number
  maximum: number
  /** Limits that leave 0.5 % of the pixels outside at either end. */
  low: number
  high: number
  histogram: number[]
}

/** Maps values (times `scale`) between low and high onto the 256 colours; NaN becomes transparent. */
export function paintImage(values: Float32Array | Uint32Array, scale: number, low: number, high: number, map: Uint32Array, out: Uint32Array): void {
  const factor = 255.999 / (high - low || 1)
  for (let index = 0; index < values.length; index++) {
    const value = values[index]! * scale
    out[index] = value === value ? map[Math.max(0, Math.min(255, (value - low) * factor | 0))]! : 0
  }
}

/**
 * Range, percentile limits (from a sample of at most 65 536 pixels spread over the image) and a histogram of `bins`
 * between minimum and maximum.
 */
export function imageStatistics(image: RawImage, scale: number, bins = 96): ImageStatistics {
  const stride = Math.max(1, Math.floor(image.values.length / 65_536))
  const sample: number[] = []
  let minimum = Infinity
  let maximum = -Infinity
  for (let index = 0; index < image.values.length; index++) {
    const value = image.values[index]! * scale
    if (!Number.isFinite(value)) continue
    if (value < minimum) minimum = value
    if (value > maximum) maximum = value
    if (index % stride === 0) sample.push(value)
  }
  if (!sample.length) return { minimum: 0, maximum: 1, low: 0, high: 1, histogram: Array<number>(bins).fill(0) }
  sample.sort((a, b) => a - b)
  const at = (share: number) => sample[Math.min(sample.length - 1, Math.floor(share * sample.length))]!
  const histogram = Array<number>(bins).fill(0)
  const width = maximum - minimum || 1
  for (const value of sample) histogram[Math.min(bins - 1, Math.floor((value - minimum) / width * bins))]!++
  const [low, high] = [at(0.005), at(0.995)]
  return { minimum, maximum, low, high: high > low ? high : low + (Math.abs(low) || 1) * 1e-3, histogram }
}

export interface View { scale: number, left: number, top: number }

/** The whole image in the middle of the box. */
export function fitView(columns: number, rows: number, width: number, height: number): View {
  const scale = Math.min(width / columns, height / rows)
  return { scale, left: (width - columns * scale) / 2, top: (height - rows * scale) / 2 }
}

/** Zooms so that the point under (x, y) of the box stays where it is. */
export function zoomView(view: View, factor: number, x: number, y: number, smallest: number): View {
  const scale = Math.max(smallest, Math.min(64, view.scale * factor))
  const change = scale / view.scale
  return { scale, left: x - (x - view.left) * change, top: y - (y - view.top) * change }
}
