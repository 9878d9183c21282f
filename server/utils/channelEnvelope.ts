import { buffer } from 'node:stream/consumers'
import { and, eq } from 'drizzle-orm'
import type { RandomAccess } from '../../jobs/formats/randomAccess'
import { readEnvelope } from '../../jobs/signal/envelope'
import { LampsumError } from '#shared/errors'
import type { ChannelEnvelope } from '#shared/schemas/results'
import { pyramidName, type FactsOf } from '#shared/stageOutputs'
import type { Database } from '../db/client'
import { stageOutputs } from '../db/schema'
import type { FileStore } from '../store/fileStore'

interface Asked { from?: number, to?: number, columns: number }

/** Smallest and largest value of a channel in each of at most `columns` stretches between two record times. */
export async function readChannelEnvelope(database: Database, store: FileStore, acquisitionId: string, name: string, { from, to, columns }: Asked): Promise<ChannelEnvelope> {
  const [output] = await database.select().from(stageOutputs).where(and(eq(stageOutputs.acquisitionId, acquisitionId), eq(stageOutputs.stage, 'record')))
  if (!output) throw new LampsumError('not-found', 'The record has not been read yet. Upload it, then wait until it has been read.')
  const { sampleRateHz, samples, channels } = (output.facts as unknown as FactsOf<'record'>).record
  const channel = channels.find(each => each.role === name)
  const key = output.files[name]
  const pyramidKey = output.files[pyramidName(name)]
  if (!channel || !key || !pyramidKey) throw new LampsumError('not-found', `The record has no channel “${name}”, only ${channels.map(each => each.role).join(', ')}.`)
  const first = Math.min(samples, Math.max(0, Math.floor((from ?? 0) * sampleRateHz)))
  const end = Math.max(first, Math.min(samples, to === undefined ? samples : Math.ceil(to * sampleRateHz)))
  const { minimum, maximum } = await readEnvelope({ samples, data: accessTo(store, key), pyramid: accessTo(store, pyramidKey) }, first, end, columns)
  return { fromSeconds: first / sampleRateHz, toSeconds: end / sampleRateHz, unit: channel.unit, minimum: Array.from(minimum), maximum: Array.from(maximum) }
}

/** A stored file as the numeric folders read it. */
const accessTo = (store: FileStore, key: string): RandomAccess => ({
  size: Number.MAX_SAFE_INTEGER,
  read: async (offset, length) => length ? await buffer(store.openRange(key, { start: offset, end: offset + length - 1 })) : new Uint8Array(0),
})

/** Pairs of minimum and maximum, little-endian float32, for clients that ask for bytes. */
export function packEnvelope({ minimum, maximum }: ChannelEnvelope): Buffer {
  const pairs = new Float32Array(2 * minimum.length)
  for (let i = 0; i < minimum.length; i++) {
    pairs[2 * i] = minimum[i]!
    pairs[2 * i + 1] = maximum[i]!
  }
  return Buffer.from(pairs.buffer)
}
