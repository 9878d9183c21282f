import type { CoverageLine } from '#shared/schemas/campaigns'

export type CoverageState = CoverageLine['state']
export const coverageWords: Record<CoverageState, string> = { missing: 'missing', shot: 'shot', summed: 'summed', released: 'released' }

export interface FrequencyAxis { toX: (frequencyHz: number) => number, ticks: { frequencyHz: number, x: number }[], logarithmic: boolean }

/**
 * One frequency axis over all lines: linear, or logarithmic when they span more than a factor of 20. `inset` keeps
 * the outermost marks inside the drawing.
 */
export function frequencyAxis(frequencies: number[], width: number, inset: number): FrequencyAxis {
  const low = Math.min(...frequencies)
  const high = Math.max(...frequencies)
  const logarithmic = low > 0 && high / low > 20
  const scale = logarithmic ? Math.log10 : (value: number) => value
  const pad = high > low ? 0 : logarithmic ? 0.5 : Math.max(1, high * 0.1)
  const [from, to] = [scale(low) - pad, scale(high) + pad]
  const toX = (frequencyHz: number) => inset + (scale(frequencyHz) - from) / (to - from) * (width - 2 * inset)
  const wanted = Math.max(2, Math.floor(width / 110))
  const values = logarithmic ? decadeTicks(10 ** from, 10 ** to) : linearTicks(from, to, wanted)
  return { toX, logarithmic, ticks: values.map(frequencyHz => ({ frequencyHz, x: toX(frequencyHz) })) }
}

export function linearTicks(from: number, to: number, wanted: number): number[] {
  const rough = (to - from) / wanted
  const power = 10 ** Math.floor(Math.log10(rough))
  const step = [1, 2, 5, 10].map(factor => factor * power).find(candidate => candidate >= rough)!
  const first = Math.ceil(from / step - 1e-9)
  const count = Math.floor(to / step + 1e-9) - first + 1
  return Array.from({ length: Math.max(0, count) }, (_, index) => Number(((first + index) * step).toPrecision(12)))
}

function decadeTicks(from: number, to: number): number[] {
  const ticks: number[] = []
  for (let power = Math.floor(Math.log10(from)); power <= Math.ceil(Math.log10(to)); power++) {
    for (const factor of [1, 2, 5]) ticks.push(factor * 10 ** power)
  }
  return ticks.filter(value => value >= from * 0.999 && value <= to * 1.001)
}

/** Puts each label in the first row where it does not touch its neighbour; more than `rows` deep it is left out (null). */
export function labelRows(positions: number[], widths: number[], rows: number, gap = 6): (number | null)[] {
  const ends = Array.from({ length: rows }, () => -Infinity)
  const order = positions.map((_, index) => index).sort((a, b) => positions[a]! - positions[b]!)
  const result: (number | null)[] = positions.map(() => null)
  for (const index of order) {
    const start = positions[index]! - widths[index]! / 2
    const row = ends.findIndex(end => start >= end + gap)
    if (row < 0) continue
    ends[row] = start + widths[index]!
    result[index] = row
  }
  return result
}

export function coverageSentence(lines: CoverageLine[]): string {
  if (!lines.length) return 'No line is planned or shot yet.'
  const count = (state: CoverageState) => lines.filter(line => line.state === state).length
  const parts = (['missing', 'shot', 'summed', 'released'] as const).filter(state => count(state)).map(state => `${count(state)} ${coverageWords[state]}`)
  const missing = count('missing')
  return `${countOf(lines.length, 'line')}: ${parts.join(', ')}.${missing ? ` Shoot the ${missing === 1 ? 'missing line' : `${missing} missing lines`} before the rig is taken down.` : ''}`
}

/** What a line's mark says aloud. */
export function coverageLabel(line: CoverageLine): string {
  const good = line.repetitionsPlanned ? `, ${line.repetitionsGood} of ${line.repetitionsPlanned} repetitions good` : line.repetitionsGood ? `, ${line.repetitionsGood} repetitions good` : ''
  return `${formatHertz(line.frequencyHz)} ${coverageWords[line.state]}${good}${line.planned ? '' : ', not in the plan'}`
}
