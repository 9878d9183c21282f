/** Repeatable random numbers in [0, 1) (mulberry32). */
export function random(seed: number): () => number {
  let state = seed >>> 0
  return () => {
    state = (state + 0x6d2b79f5) >>> 0
    let t = state
    t = Math.imul(t ^ (t >>> 15), t | 1)
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61)
    return ((t ^ (t >>> 14)) >>> 0) / 2 ** 32
  }
}

/** Normally distributed, mean 0, deviation 1 (Box & Muller 1958). */
export const normal = (next: () => number) => Math.sqrt(-2 * Math.log(1 - next())) * Math.cos(2 * Math.PI * next())

/** A texture that can be moved by any fraction of a pixel without interpolation: a sum of plane waves. */
export class WaveTexture {
  private readonly waves: { kx: number, ky: number, phase: number }[]
  constructor(seed: number, { count = 40, least = 0.3, most = 1.8 } = {}) {
    const next = random(seed)
    this.waves = Array.from({ length: count }, () => {
      const k = least + (most - least) * next()
      const angle = 2 * Math.PI * next()
      return { kx: k * Math.cos(angle), ky: k * Math.sin(angle), phase: 2 * Math.PI * next() }
    })
  }

  /** Content moved by (dx, dy); values about 1. */
  at(x: number, y: number, dx = 0, dy = 0): number {
    let value = 0
    for (const { kx, ky, phase } of this.waves) value += Math.cos(kx * (x - dx) + ky * (y - dy) + phase)
    return 1 + value / (4 * Math.sqrt(this.waves.length))
  }

  picture(width: number, height: number, dx = 0, dy = 0, scale = 1_000_000): Uint32Array {
    return Uint32Array.from({ length: width * height }, (_, i) => Math.max(0, Math.round(scale * this.at(i % width, Math.floor(i / width), dx, dy))))
  }
}
