/** Seeded numbers in [0, 1): the small generator "sfc32" (Chris Doty-Humphrey), the same on every machine. */
export function seededRandom(seed: number): () => number {
  let a = 0x9E3779B9 ^ seed
  let b = 0x243F6A88 + Math.imul(seed, 0x85EBCA6B)
  let c = 0xB7E15162 ^ (seed << 7)
  let counter = 1
  const next = () => {
    const sum = (((a + b) | 0) + counter) | 0
    counter = (counter + 1) | 0
    a = b ^ (b >>> 9)
    b = (c + (c << 3)) | 0
    c = (c << 21) | (c >>> 11)
    c = (c + sum) | 0
    return (sum >>> 0) / 4294967296
  }
  for (let i = 0; i < 20; i++) next()
  return next
}

/** Standard normal numbers by the Box–Muller transform. */
export function gaussianRandom(seed: number): () => number {
  const uniform = seededRandom(seed)
  let spare: number | null = null
  return () => {
    if (spare !== null) {
      const value = spare
      spare = null
      return value
    }
    const radius = Math.sqrt(-2 * Math.log(1 - uniform()))
    const angle = 2 * Math.PI * uniform()
    spare = radius * Math.sin(angle)
    return radius * Math.cos(angle)
  }
}
