import type { Flag } from '../../shared/measurement'
import type { ChannelRole } from '../../shared/records'
import { voltsOf } from './channelScale'
import { RecordError } from './recordError'
import type { RecordColumn } from './recordTable'

export type ColumnChoice = string | number
export type ColumnName = ChannelRole | 'time'
export type ColumnMapping = Partial<Record<ColumnName, ColumnChoice>>

export interface ColumnGuess {
  role: ColumnName
  /** Why, to be shown to people: "its name". */
  reason: string
}

export interface ChosenColumns {
  /** Column index of each that the record has. */
  columns: Partial<Record<ColumnName, number>>
  flags: Flag[]
}

const columnNames = ['time', 'illumination', 'force', 'acceleration'] as const satisfies ColumnName[]
const namePatterns: Record<ColumnName, RegExp> = {
  time: /^t$|time|zeit/i,
  illumination: /light|lamp|photo|diode|illum|\bled\b|^led|licht/i,
  force: /force|load|kraft/i,
  acceleration: /acc|beschl/i,
}
const unitPatterns: Record<ColumnName, RegExp> = {
  time: /^(?:s|sec|ms|[µμu]s)$/i,
  illumination: /^(?:lx|lux|lm|cd\/m²)$/i,
  force: /^(?:m|k)?N$|^lbf$/,
  acceleration: /^(?:mm|m)\/s(?:²|\^2|2|\*\*2)$|^gn?$/i,
}
const evidenceRows = 8

/**
 * What each column that nobody named may be, with the reason: by its name; else by what the file's own type field says;
 * else by its unit; a first column that rises evenly as time; the one channel that is left over as illumination.
 * More than one column may be guessed for a role.
 *
 * @param firstRows the first values of every column, if known
 * @returns column index → guess
 */
export function guessColumns(columns: readonly RecordColumn[], asked: ColumnMapping, taken: ReadonlySet<number>, firstRows?: readonly ArrayLike<number>[]): Map<number, ColumnGuess> {
  const guesses = new Map<number, ColumnGuess>()
  const free = () => columns.filter(({ index }) => !taken.has(index) && !guesses.has(index))
  const roles = columnNames.filter(role => asked[role] === undefined)
  const tests: ((column: RecordColumn, role: ColumnName) => string | null)[] = [
    ({ header, name }, role) => header && namePatterns[role].test(name) ? 'its name' : null,
    ({ hint }, role) => hint?.role === role ? hint.reason : null,
    ({ unit }, role) => unit !== null && unitPatterns[role].test(unit) ? `its unit, ${unit}` : null,
    ({ index }, role) => role === 'time' && index === 0 && columns.length > 1 && firstRows && risesEvenly(firstRows[0]) ? 'it rises evenly' : null,
  ]
  for (const test of tests) {
    const open = roles.filter(role => ![...guesses.values()].some(guess => guess.role === role))
    for (const role of open) {
      for (const column of free()) {
        const reason = test(column, role)
        if (reason) guesses.set(column.index, { role, reason })
      }
    }
  }
  const [only, ...others] = free()
  const isOpen = roles.includes('illumination') && ![...guesses.values()].some(({ role }) => role === 'illumination')
  if (isOpen && only && !others.length && (only.unit === null || voltsOf(only.unit) !== null)) guesses.set(only.index, { role: 'illumination', reason: 'it is the only channel left' })
  return guesses
}

/** Steps all alike to a tenth, over at least eight rows. */
function risesEvenly(values: ArrayLike<number>): boolean {
  if (values.length < evidenceRows) return false
  const step = (values[values.length - 1] - values[0]) / (values.length - 1)
  for (let i = 1; i < values.length; i++) if (!(Math.abs(values[i] - values[i - 1] - step) <= 0.1 * step)) return false
  return step > 0
}

/**
 * Decide which column is which: as asked, by header text (case does not matter) or by index from 0; what is not asked
 * for is guessed, see `guessColumns`.
 *
 * @throws RecordError `unknown-column`, `no-illumination`, `ambiguous-columns`
 */
export function chooseColumns(columns: readonly RecordColumn[], asked: ColumnMapping, firstRows?: readonly ArrayLike<number>[]): ChosenColumns {
  const chosen: ChosenColumns = { columns: {}, flags: [] }
  for (const role of columnNames) {
    const choice = asked[role]
    if (choice !== undefined) chosen.columns[role] = findColumn(columns, role, choice)
  }
  const guesses = guessColumns(columns, asked, new Set(Object.values(chosen.columns)), firstRows)
  for (const role of columnNames.filter(name => asked[name] === undefined)) {
    const matches = columns.filter(({ index }) => guesses.get(index)?.role === role)
    if (!matches.length) continue
    if (role === 'illumination' && matches.length > 1) throw new RecordError('ambiguous-columns', `More than one column could be the illumination: ${list(matches)}. Say which one it is.`)
    chosen.columns[role] = matches[0].index
    if (matches.length > 1) chosen.flags.push({ code: 'other-columns', severity: 'note', message: `“${textOf(matches[0])}” is taken as the ${role}; ${list(matches.slice(1))} could be meant as well.` })
  }
  const { illumination } = chosen.columns
  if (illumination === undefined) throw new RecordError('no-illumination', `The record has no column that is known as the illumination. ${describe(columns)} Say which column holds the lamp signal.`)
  if (asked.illumination === undefined) chosen.flags.push({ code: 'columns-guessed', severity: 'note', message: `The lamp signal is taken from “${textOf(columns[illumination])}” (${guesses.get(illumination)!.reason}). If that is wrong, say which column it is.` })
  return chosen
}

function findColumn(columns: readonly RecordColumn[], role: ColumnName, choice: ColumnChoice): number {
  const same = (a: string) => a.toLowerCase() === String(choice).trim().toLowerCase()
  const column = typeof choice === 'number' ? columns[choice] : columns.find(({ header }) => same(header)) ?? columns.find(({ name }) => same(name))
  if (column) return column.index
  throw new RecordError('unknown-column', `The ${role} column ${typeof choice === 'number' ? `number ${choice}` : `“${choice}”`} is not in the record. ${describe(columns)}`)
}

const shownColumns = 20
const textOf = ({ header, name }: RecordColumn) => header || name
const list = (columns: readonly RecordColumn[]) => columns.slice(0, shownColumns).map(column => `“${textOf(column)}”`).join(', ') + (columns.length > shownColumns ? ` and ${columns.length - shownColumns} more` : '')

function describe(columns: readonly RecordColumn[]): string {
  return columns.some(({ header }) => header) ? `Its columns are ${list(columns)}.` : `Its ${columns.length} columns have no header; they count from 0.`
}
