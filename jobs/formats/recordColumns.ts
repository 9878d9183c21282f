import type { ChannelRole } from '../../shared/records'
import type { CsvLayout } from './csvLayout'
import { RecordError } from './recordError'

export type ColumnChoice = string | number
export type ColumnName = ChannelRole | 'time'
export type ColumnMapping = Partial<Record<ColumnName, ColumnChoice>>

export interface ChosenColumns {
  /** Column index of each that the record has. */
  columns: Partial<Record<ColumnName, number>>
  /** Headers that could have been meant as well. */
  passedOver: { role: ColumnName, headers: string[] }[]
}

const guesses: Record<ColumnName, RegExp> = {
  time: /^t$|time|zeit/i,
  illumination: /light|lamp|photo|diode|illum|\bled\b|^led|licht/i,
  force: /force|load|kraft/i,
  acceleration: /acc|beschl/i,
}

/**
 * Decide which column is which: as asked, by header text (case does not matter) or by index from 0; what is not asked
 * for is guessed from the headers.
 *
 * @throws RecordError `unknown-column`, `no-illumination`, `ambiguous-columns`
 */
export function chooseColumns(layout: CsvLayout, asked: ColumnMapping): ChosenColumns {
  const chosen: ChosenColumns = { columns: {}, passedOver: [] }
  const roles = Object.keys(guesses) as ColumnName[]
  for (const role of roles) {
    const choice = asked[role]
    if (choice !== undefined) chosen.columns[role] = findColumn(layout, role, choice)
  }
  const taken = new Set(Object.values(chosen.columns))
  for (const role of roles.filter(name => asked[name] === undefined)) {
    const matches = layout.names.flatMap((name, column) => guesses[role].test(name) && !taken.has(column) ? [column] : [])
    if (!matches.length) continue
    if (role === 'illumination' && matches.length > 1) throw new RecordError('ambiguous-columns', `More than one column could be the illumination: ${list(matches.map(column => layout.headers[column]))}. Say which one it is.`)
    chosen.columns[role] = matches[0]
    taken.add(matches[0])
    if (matches.length > 1) chosen.passedOver.push({ role, headers: matches.slice(1).map(column => layout.headers[column]) })
  }
  if (chosen.columns.illumination === undefined) throw new RecordError('no-illumination', `The record has no column that is known as the illumination. ${describe(layout)} Say which column holds the lamp signal.`)
  return chosen
}

function findColumn(layout: CsvLayout, role: ColumnName, choice: ColumnChoice): number {
  const same = (a: string) => a.toLowerCase() === String(choice).trim().toLowerCase()
  const column = typeof choice === 'number' ? choice : [layout.headers.findIndex(same), layout.names.findIndex(same)].find(index => index >= 0) ?? -1
  if (Number.isInteger(column) && column >= 0 && column < layout.columnCount) return column
  throw new RecordError('unknown-column', `The ${role} column ${typeof choice === 'number' ? `number ${choice}` : `“${choice}”`} is not in the record. ${describe(layout)}`)
}

function describe({ headers, columnCount }: CsvLayout): string {
  return headers.length ? `Its columns are ${list(headers)}.` : `Its ${columnCount} columns have no header; they count from 0.`
}

const list = (names: string[]) => names.map(name => `“${name}”`).join(', ')
