import type { Flag } from '../../shared/measurement'
import type { ChannelRole } from '../../shared/records'
import { RecordError } from './recordError'
import type { RecordColumn, RecordOptions } from './recordTable'

export interface ChannelScale {
  factor: number
  unit: string | null
  flags: Flag[]
}

const voltsPerUnit: Record<string, number> = { v: 1, volt: 1, volts: 1, mv: 1e-3, µv: 1e-6, μv: 1e-6, uv: 1e-6, kv: 1e3 }

export const voltsOf = (unit: string | null): number | null => voltsPerUnit[unit?.trim().toLowerCase() ?? ''] ?? null

/**
 * What a channel's values are multiplied by, and their unit then.
 *
 * Without a sensitivity the values stay as they are and a given unit only names them. With one (unit per volt) they are
 * taken as volts; a channel without unit is taken as volts and flagged `volts-assumed`.
 *
 * @throws RecordError `sensitivity-not-volts` when the file says that the values are in another unit already
 */
export function channelScale(role: ChannelRole, column: RecordColumn, { units = {}, sensitivities = {} }: RecordOptions): ChannelScale {
  const sensitivity = sensitivities[role]
  if (sensitivity === undefined) return { factor: 1, unit: units[role] ?? column.unit, flags: [] }
  const volts = voltsOf(column.unit)
  if (volts === null && column.unit !== null) throw new RecordError('sensitivity-not-volts', `The ${role} channel “${column.name}” is in ${column.unit} already, so a sensitivity per volt does not fit. Leave the sensitivity out, or take the channel that is in volts.`)
  const flags: Flag[] = volts === null ? [{ code: 'volts-assumed', severity: 'note', message: `The file gives no unit for “${column.name}”; its values are taken as volts and multiplied by ${sensitivity}. Check the ${role}’s size.` }] : []
  return { factor: sensitivity * (volts ?? 1), unit: units[role] ?? null, flags }
}
