import { and, eq } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { ChannelEnvelope } from '#shared/schemas/results'
import type { FactsOf } from '#shared/stageOutputs'
import type { Database } from '../db/client'
import { stageOutputs } from '../db/schema'
import type { FileStore } from '../store/fileStore'
import { blockSamples, envelopeFromBlocks, EnvelopeBuilder, type Blocks } from './envelopeBins'
import { recentlyUsed } from './recentlyUsed'

/** Up to this many samples are read as they are; above, an overview of the whole channel is made once and kept. */
const readDirectlySamples = 1 << 20
const overviews = recentlyUsed<Blocks>(12)

interface Asked { from?: number, to?: number, columns: number }

/** Smallest and largest value of a channel in each of at most `columns` bins between two record times. */
export async function readChannelEnvelope(database: Database, store: FileStore, acquisitionId: string, name: string, { from, to, columns }: Asked): Promise<ChannelEnvelope> {
  const [output] = await database.select().from(stageOutputs).where(and(eq(stageOutputs.acquisitionId, acquisitionId), eq(stageOutputs.stage, 'record')))
  if (!output) throw new LampsumError('not-found', 'The record has not been read yet. Upload it, then wait until it has been read.')
  const { sampleRateHz, samples, channels } = (output.facts as unknown as FactsOf<'record'>).record
  const channel = channels.find(each => each.role === name)
  const key = output.files[name]
  if (!channel || !key) throw new LampsumError('not-found', `The record has no channel “${name}”, only ${channels.map(each => each.role).join(', ')}.`)
  const first = Math.min(samples, Math.max(0, Math.floor((from ?? 0) * sampleRateHz)))
  const end = Math.max(first, Math.min(samples, to === undefined ? samples : Math.ceil(to * sampleRateHz)))
  const bins = Math.min(columns, end - first)
  const { minimum, maximum } = end - first <= readDirectlySamples || (end - first) / bins < 8 * blockSamples
    ? await readBins(store, key, first, end, bins)
    : envelopeFromBlocks(await overviews(key, () => readBlocks(store, key, samples)), first, end, bins)
  return { fromSeconds: first / sampleRateHz, toSeconds: end / sampleRateHz, unit: channel.unit, minimum: Array.from(minimum), maximum: Array.from(maximum) }
}

async function readBins(store: FileStore, key: string, first: number, end: number, bins: number): Promise<Blocks> {
  const builder = new EnvelopeBuilder(end - first, bins)
  if (bins > 0) for await (const values of readFloats(store, key, first, end)) builder.add(values)
  return builder
}

const readBlocks = async (store: FileStore, key: string, samples: number) => {
  const builder = new EnvelopeBuilder(samples, Math.ceil(samples / blockSamples), blockSamples)
  for await (const values of readFloats(store, key, 0, samples)) builder.add(values)
  return builder
}

/** Raw little-endian float32, in pieces. */
async function* readFloats(store: FileStore, key: string, first: number, end: number): AsyncGenerator<Float32Array> {
  let rest: Buffer = Buffer.alloc(0)
  for await (const chunk of store.openRange(key, { start: 4 * first, end: 4 * end - 1 })) {
    const bytes = rest.length ? Buffer.concat([rest, chunk as Buffer]) : chunk as Buffer
    const whole = bytes.length - bytes.length % 4
    rest = bytes.subarray(whole)
    if (bytes.byteOffset % 4 === 0) yield new Float32Array(bytes.buffer, bytes.byteOffset, whole / 4)
    else yield new Float32Array(bytes.buffer.slice(bytes.byteOffset, bytes.byteOffset + whole))
  }
}

/** Pairs of minimum and maximum, little-endian float32, for clients that ask for bytes. */
export function packEnvelope({ minimum, maximum }: ChannelEnvelope): Buffer {
  const pairs = new Float32Array(2 * minimum.length)
  for (let i = 0; i < minimum.length; i++) {
    pairs[2 * i] = minimum[i]!
    pairs[2 * i + 1] = maximum[i]!
  }
  return Buffer.from(pairs.buffer)
}
