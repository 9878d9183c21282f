/** The DAQ record: which column is which channel, and what the record stage found. */
import { z } from 'zod'

export const channelRoles = ['illumination', 'force', 'acceleration'] as const
export type ChannelRole = (typeof channelRoles)[number]

/** Formats of records, recognised by content; `audio` is the clip's own sound. */
export const recordFormats = ['csv', 'wav', 'npy', 'uff58', 'hdf5', 'audio'] as const
export type RecordFormat = (typeof recordFormats)[number]

const columnSchema = z.union([z.string().min(1).max(120), z.number().int().min(0).max(999)])

/** Each column is a header name or an index from 0; what is left out is guessed from the headers. */
export const channelMappingSchema = z.object({
  columns: z.object({
    time: columnSchema.optional(),
    illumination: columnSchema.optional(),
    force: columnSchema.optional(),
    acceleration: columnSchema.optional(),
  }).default({}),
  sampleRateHz: z.number().positive().max(1e8).optional(),
  units: z.partialRecord(z.enum(channelRoles), z.string().max(24)).optional(),
  /** Units per volt, for channels recorded in volts. */
  sensitivities: z.partialRecord(z.enum(channelRoles), z.number().refine(value => value !== 0, 'Give a sensitivity other than 0.')).optional(),
})
export type ChannelMapping = z.infer<typeof channelMappingSchema>

export interface ChannelFacts {
  role: ChannelRole
  name: string
  unit: string | null
  minimum: number
  maximum: number
}

export interface RecordFacts {
  sampleRateHz: number
  samples: number
  durationSeconds: number
  /** Time of the first sample as the file counts it; record time 0 is the first sample all the same. */
  startSeconds: number
  channels: ChannelFacts[]
}
