/** A number as people type it; null for nothing, undefined for what is no number. */
export function parseNumber(text: string): number | null | undefined {
  const plain = text.replace(/[\s\u00A0\u2009\u202F']/g, '').replace(/^[−–]/, '-').replace(',', '.')
  if (plain === '') return null
  const value = /^[-+]?(\d+\.?\d*|\.\d+)(e[-+]?\d+)?$/i.test(plain) ? Number(plain) : Number.NaN
  return Number.isFinite(value) ? value : undefined
}

export interface PlannedLine { frequencyHz: number, repetitions: number | null }

/**
 * A pasted list of lines: one frequency or many, apart by new lines, tabs, semicolons, spaces or ", ". A comma between
 * digits is a decimal comma when the list shows another separator, else it separates. "412 Hz x3" asks for three
 * repetitions.
 */
export function parseLines(text: string): PlannedLine[] {
  const decimalComma = /[\n;\t]/.test(text.trim()) || /\d,\d+\s*,\s/.test(text) || /^\s*\d+,\d+\s*(hz)?\s*$/i.test(text)
  const normal = decimalComma ? text.replace(/(\d),(\d)/g, '$1.$2') : text
  const pattern = /(\d+(?:\.\d+)?)\s*(k?hz)?(?:\s*[x×]\s*(\d+))?/gi
  return [...normal.matchAll(pattern)]
    .map(([, number, unit, times]) => ({
      frequencyHz: Number(number) * (unit?.toLowerCase() === 'khz' ? 1000 : 1),
      repetitions: times ? Number(times) : null,
    }))
    .filter(line => line.frequencyHz > 0)
}
