import type { Flag } from '../../shared/measurement'
import { channelRoles, type ChannelRole } from '../../shared/records'
import { channelScale, type ChannelScale } from './channelScale'
import type { ChosenColumns } from './recordColumns'
import { RecordError } from './recordError'
import type { RecordColumn, RecordOptions } from './recordTable'
import { GivenRate, UniformTime, type TimeBase } from './uniformTime'

const secondsPerUnit: Record<string, number> = { ms: 1e-3, us: 1e-6, µs: 1e-6, μs: 1e-6, min: 60 }
const rateTolerance = 1e-3
const largestFloat32 = 3.4028235e38

export interface WantedChannel {
  role: ChannelRole
  column: RecordColumn
  scale: ChannelScale
}

/** What is taken from a file: the channels first, then the time column, if there is one. */
export interface RecordPlan {
  channels: WantedChannel[]
  /** Column indices in the order in which values are handed over. */
  wanted: number[]
  /** Null without a time column. */
  times: UniformTime | GivenRate | null
  timeScale: number
  /** Of columns and scales; `timeBase` has its own. */
  flags: Flag[]
  timeBase: () => TimeBase
}

/**
 * Turn a choice of columns and what was given into what has to be read.
 *
 * @param fileRateHz what the file's header says, if it does; a given rate goes first, then this one, then a time column
 * @param place how to name a row in messages: "Line 7"
 * @throws RecordError `no-time`, `sensitivity-not-volts`
 */
export function planRecord(columns: readonly RecordColumn[], chosen: ChosenColumns, options: RecordOptions, fileRateHz: number | null, startSeconds: number, place: string): RecordPlan {
  const channels = channelRoles.flatMap((role) => {
    const index = chosen.columns[role]
    return index === undefined ? [] : [{ role, column: columns[index], scale: channelScale(role, columns[index], options) }]
  })
  const { time } = chosen.columns
  const given = options.sampleRateHz
  const needsTime = time !== undefined && (fileRateHz === null || given !== undefined)
  if (!needsTime && given === undefined && fileRateHz === null) throw new RecordError('no-time', 'The record has neither a time column nor a sample rate. Say which column is the time, or give the sample rate in Hz.')
  const times = !needsTime ? null : given === undefined ? new UniformTime(place) : new GivenRate(given)
  return {
    channels, times,
    wanted: [...channels.map(({ column }) => column.index), ...needsTime ? [time] : []],
    timeScale: time === undefined ? 1 : secondsPerUnit[columns[time].unit?.toLowerCase() ?? ''] ?? 1,
    flags: [...chosen.flags, ...channels.flatMap(({ scale }) => scale.flags)],
    timeBase: () => times?.finish() ?? { sampleRateHz: given ?? fileRateHz!, startSeconds, flags: rateFlags(given, fileRateHz) },
  }
}

function rateFlags(given: number | undefined, fileRateHz: number | null): Flag[] {
  if (given === undefined || fileRateHz === null || Math.abs(given / fileRateHz - 1) <= rateTolerance) return []
  return [{ code: 'sample-rate-differs', severity: 'warning', message: `The file says ${Number(fileRateHz.toPrecision(6))} Hz, but the ${given} Hz that were given are used. Check the sample rate.` }]
}

/**
 * Store a block's values in a channel from index `at` on.
 *
 * @throws RecordError `not-a-number` for NaN, infinities and what float32 cannot hold
 */
export function storeBlock(values: Float64Array, into: Float32Array, at: number, { column, scale: { factor } }: WantedChannel): void {
  for (let i = 0; i < values.length; i++) {
    const value = factor * values[i]
    if (!(Math.abs(value) <= largestFloat32)) throw new RecordError('not-a-number', `Sample ${at + i} of “${column.name}” (counted from 0) is ${Number.isNaN(value) ? 'no number' : 'beyond all measure'}: ${values[i]}. The input was overloaded or a sample is missing; cut the record there or record again.`)
    into[at + i] = value
  }
}
