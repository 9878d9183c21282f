/** A complex number as [real, imaginary]. */
export type Complex = readonly [number, number]

export const times = (a: Complex, b: Complex): Complex => [a[0] * b[0] - a[1] * b[1], a[0] * b[1] + a[1] * b[0]]

/** e^z. */
export function exponential(z: Complex): Complex {
  const size = Math.exp(z[0])
  return [size * Math.cos(z[1]), size * Math.sin(z[1])]
}

/** ∫ e^{λτ} dτ from 0 to `length`: (e^{λ·length} − 1)/λ, by its series where λ·length is small. */
export function exponentialIntegral(lambda: Complex, length: number): Complex {
  const z: Complex = [lambda[0] * length, lambda[1] * length]
  if (Math.hypot(z[0], z[1]) < 1e-2) {
    let term: Complex = [length, 0]
    let real = length
    let imaginary = 0
    for (let n = 2; n <= 8; n++) {
      term = times(term, [z[0] / n, z[1] / n])
      real += term[0]
      imaginary += term[1]
    }
    return [real, imaginary]
  }
  const [re, im] = exponential(z)
  const square = lambda[0] ** 2 + lambda[1] ** 2
  return times([re - 1, im], [lambda[0] / square, -lambda[1] / square])
}
