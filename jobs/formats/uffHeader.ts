import { RecordError } from './recordError'
import type { ColumnName } from './recordColumns'

/** What the eleven header lines of a dataset 58 say. */
export interface UffHeader {
  /** First identification line; null when it is empty or NONE. */
  title: string | null
  /** 1 is a time response. */
  functionType: number
  /** "12+Z"; null without a node. */
  dof: string | null
  /** 2 and 4 real, 5 and 6 complex; 2 and 5 single, 4 and 6 double precision. */
  ordinateType: number
  /** Values, or pairs of abscissa and value when the spacing is uneven. */
  count: number
  isEven: boolean
  firstAbscissa: number
  step: number
  /** Half of the last digit that the step is written with. */
  stepTolerance: number
  abscissa: UffAxis
  ordinate: UffAxis
}

export interface UffAxis {
  /** Specific data type: 8 displacement, 9 reaction force, 11 velocity, 12 acceleration, 13 excitation force, 17 time, 18 frequency. */
  dataType: number
  label: string | null
  unit: string | null
}

const directions = ['', 'X', 'Y', 'Z', 'RX', 'RY', 'RZ']
const ordinateRoles: Record<number, [ColumnName, string]> = { 9: ['force', 'reaction force'], 12: ['acceleration', 'acceleration'], 13: ['force', 'excitation force'] }
const time = 17
const unknownTypes = [0, 1]

export const hintOf = ({ ordinate }: UffHeader): { role: ColumnName, reason: string } | undefined => {
  const found = ordinateRoles[ordinate.dataType]
  return found && { role: found[0], reason: `its data type, ${found[1]}` }
}

/** Real values over time: what a channel can be. */
export function isTimeHistory({ functionType, ordinateType, abscissa }: UffHeader): boolean {
  const isReal = ordinateType === 2 || ordinateType === 4
  return isReal && (abscissa.dataType === time || (unknownTypes.includes(functionType) && unknownTypes.includes(abscissa.dataType)))
}

/**
 * Read the header lines of a dataset 58: five of identification, then FORMAT(2(I5,I10),2(1X,10A1,I10,I4)),
 * (3I10,3E13.5) and four of (I10,3I5,2(1X,20A1)). Lines that are not in their columns are read by blanks.
 *
 * @param lines eleven, without line ends
 * @param byte where they begin, for messages
 * @throws RecordError `uff-header`
 */
export function readUffHeader(lines: readonly string[], byte: number): UffHeader {
  const refuse = (line: number, expected: string) => new RecordError('uff-header', `The dataset 58 at byte ${byte}: header line ${line} should hold ${expected}, but reads “${(lines[line - 1] ?? '').trim().slice(0, 60)}”. Export the universal file again.`)
  const [functionType, , , , , node, direction] = fields(lines[5] ?? '', [5, 10, 5, 10, 11, 10, 4])
  const form = numbers(lines[6] ?? '', [10, 10, 10, 13, 13, 13])
  const [ordinateType, count, spacing, firstAbscissa, step] = form
  if (!Number.isInteger(Number(functionType))) throw refuse(6, 'the function type and its nodes')
  if (form.length < 5 || form.slice(0, 5).some(Number.isNaN) || ![2, 4, 5, 6].includes(ordinateType) || !(Number.isInteger(count) && count >= 0)) throw refuse(7, 'data type, number of values, spacing, first abscissa and step')
  if (spacing !== 0 && !(step > 0)) throw refuse(7, 'a step above 0')
  return {
    title: text(lines[0] ?? ''), functionType: Number(functionType), dof: dofOf(Number(node), Number(direction)),
    ordinateType, count, isEven: spacing !== 0, firstAbscissa, step, stepTolerance: halfDigit(lines[6], step), abscissa: axisOf(lines[7] ?? ''), ordinate: axisOf(lines[8] ?? ''),
  }
}

function axisOf(line: string): UffAxis {
  const [dataType] = numbers(line, [10])
  return { dataType: Number.isNaN(dataType) ? 0 : dataType, label: text(line.slice(26, 46)), unit: text(line.slice(47, 67)) }
}

function dofOf(node: number, direction: number): string | null {
  if (!(node > 0)) return null
  const axis = directions[Math.abs(direction)] ?? ''
  return `${node}${axis && (direction < 0 ? '-' : '+')}${axis}`
}

/** From the digits after the point of the fifth number as written: "1.95313E-05" has five. */
function halfDigit(line: string, step: number): number {
  const written = [...line.matchAll(/[-+]?\d+(?:\.(\d*))?(?:[ED][-+]?\d+)?/gi)][4]
  return 0.5 * 10 ** (Math.floor(Math.log10(step || 1)) - (written?.[1]?.length ?? 0))
}

const text = (value: string) => /^(?:none)?$/i.test(value.trim()) ? null : value.trim()

function fields(line: string, widths: number[]): string[] {
  let at = 0
  const fixed = widths.map(width => line.slice(at, at += width).trim())
  const isNumber = (value: string) => /^-?\d*$/.test(value)
  if (isNumber(fixed[0]) && isNumber(fixed[5]) && isNumber(fixed[6])) return fixed
  return line.trim().split(/\s+/)
}

/** By blanks when that gives enough numbers, else by columns: fields may touch each other. */
function numbers(line: string, widths: number[]): number[] {
  const toNumber = (value: string) => value ? Number(value.replace(/d/i, 'e')) : Number.NaN
  const free = line.trim().split(/\s+/).map(toNumber)
  if (free.length >= widths.length && !free.slice(0, widths.length).some(Number.isNaN)) return free
  let at = 0
  return widths.map(width => toNumber(line.slice(at, at += width).trim()))
}
