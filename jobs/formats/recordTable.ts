import type { Flag } from '../../shared/measurement'
import type { ChannelRole, RecordFormat } from '../../shared/records'
import type { ColumnMapping, ColumnName } from './recordColumns'

/** One column or channel that a file holds, whether it is used or not. */
export interface RecordColumn {
  /** From 0; what a mapping may name. */
  index: number
  /** Without its unit; "column 3" or "channel 1" where the file has no name. */
  name: string
  /** As the file writes it, unit and all; empty when the file has no name. */
  header: string
  unit: string | null
  /** What the file itself says the column is, where the format has a field for that. */
  hint?: { role: ColumnName, reason: string }
}

/** How long and how fast a column is. */
export interface RecordSeries {
  rows: number
  sampleRateHz: number | null
  startSeconds: number
}

/** A record of a format with known length, opened but not read. */
export interface RecordTable {
  format: RecordFormat
  /** For people: "WAV, 24-bit integer". */
  description: string
  columns: RecordColumn[]
  /** Samples of each column. */
  rows: number
  /** Null when the file does not say: then a time column or a given rate is needed. */
  sampleRateHz: number | null
  startSeconds: number
  flags: Flag[]
  /** A column's own length, rate and start, where the file's columns differ. */
  seriesOf?: (index: number) => RecordSeries
  /**
   * Values of the wanted columns for rows `from` to before `to`, in order, in blocks: one array a column, all of one
   * length. The arrays may be used again for the next block.
   */
  blocks: (wanted: readonly number[], from: number, to: number) => AsyncIterable<Float64Array[]>
  /** Gives up what opening took, where it took something. */
  close?: () => void
}

export interface RecordChannel {
  role: ChannelRole
  /** Header without its unit, or "column 3". */
  name: string
  unit: string | null
  data: Float32Array
}

export interface RecordData {
  format: RecordFormat
  /** For people: "WAV, 24-bit integer". */
  description: string
  channels: RecordChannel[]
  sampleRateHz: number
  /** Time of the first sample as the file counts it; 0 when it does not say. */
  startSeconds: number
  /** Samples of each channel. */
  rows: number
  /** All that the file holds. */
  columns: RecordColumn[]
  flags: Flag[]
}

export interface RecordOptions {
  columns?: ColumnMapping
  /** Goes before the file's own rate and its time column. */
  sampleRateHz?: number
  /** Go before the units in the file. */
  units?: Partial<Record<ChannelRole, string>>
  /** Units per volt: the channel's volts are multiplied by it, and `units` says what comes out. */
  sensitivities?: Partial<Record<ChannelRole, number>>
}
