/** One closed outline around the columns' minima and maxima; x counts columns, y runs down over `height`. */
export function envelopePath(minimum: number[], maximum: number[], low: number, span: number, height: number): string {
  const y = (value: number) => ((1 - (value - low) / span) * (height - 2) + 1).toFixed(2)
  const top = maximum.map((value, index) => `${index},${y(value)}`)
  const bottom = minimum.map((value, index) => `${index},${y(value)}`).reverse()
  return top.length ? `M${top.join('L')}L${bottom.join('L')}Z` : ''
}
