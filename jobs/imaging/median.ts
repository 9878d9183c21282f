/** Median of up to about 65 000 evenly spaced values; NaN of none. */
export function medianOf(values: ArrayLike<number>): number {
  const every = Math.max(1, Math.ceil(values.length / 65_536))
  const some = Float64Array.from({ length: Math.ceil(values.length / every) }, (_, i) => values[i * every]).sort()
  if (!some.length) return Number.NaN
  return some.length % 2 ? some[some.length >> 1] : (some[(some.length >> 1) - 1] + some[some.length >> 1]) / 2
}
