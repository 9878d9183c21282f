import { buffer } from 'node:stream/consumers'
import { and, eq, inArray } from 'drizzle-orm'
import { readNpy } from '../../jobs/formats/npy'
import { readNpz } from '../../jobs/formats/npzReader'
import { LampsumError } from '#shared/errors'
import type { Light } from '#shared/schemas/results'
import type { Database } from '../db/client'
import { stageOutputs } from '../db/schema'
import type { FileStore } from '../store/fileStore'
import { recentlyUsed } from './recentlyUsed'

const measuredFiles = recentlyUsed<Float64Array>(8)
const predictedFiles = recentlyUsed<Float64Array>(8)

/** Measured and predicted light of the frames `from` … `to` − 1, as means over at most `columns` columns. */
export async function readLight(database: Database, store: FileStore, acquisitionId: string, { from, to, columns }: { from?: number, to?: number, columns: number }): Promise<Light> {
  const outputs = await database.select().from(stageOutputs).where(and(eq(stageOutputs.acquisitionId, acquisitionId), inArray(stageOutputs.stage, ['meter', 'align', 'sum'])))
  const meter = outputs.find(output => output.stage === 'meter')?.files
  const meterKey = meter?.light ?? meter?.glance
  // The sum stage aligns anew with every frame; whichever spoke last is in force.
  const predictedKey = outputs.filter(output => output.files.predicted).sort((a, b) => b.createdAt.getTime() - a.createdAt.getTime())[0]?.files.predicted
  if (!meterKey) throw new LampsumError('not-found', 'The light of the frames has not been measured yet. It is when the clip has been read.')
  const measured = await measuredFiles(meterKey, async () => readNpz(await buffer(store.openRange(meterKey))).light!.data as Float64Array)
  const predicted = predictedKey ? await predictedFiles(predictedKey, async () => readNpy(await buffer(store.openRange(predictedKey))).data as Float64Array) : null
  return averageLight(measured, predicted?.length === measured.length ? predicted : null, { from: from ?? 0, to: to ?? measured.length, columns })
}

/** `frames` holds the first frame of each column. Frames not yet measured have no light, frames outside the record no prediction (null). */
export function averageLight(measured: Float64Array, predicted: Float64Array | null, { from, to, columns }: { from: number, to: number, columns: number }): Light {
  const first = Math.min(from, measured.length)
  const end = Math.max(first, Math.min(to, measured.length))
  const count = Math.min(columns, end - first)
  const edges = Array.from({ length: count + 1 }, (_, column) => first + Math.floor(column * (end - first) / count))
  const means = (values: Float64Array) => edges.slice(0, -1).map((edge, column) => meanOf(values, edge, edges[column + 1]!))
  return {
    frames: edges.slice(0, -1),
    measured: count ? means(measured) : [],
    predicted: predicted && (count ? means(predicted) : []),
  }
}

/** NaN where there is no value; null when there is none at all. */
function meanOf(values: Float64Array, from: number, to: number): number | null {
  let sum = 0
  let count = 0
  for (let i = from; i < to; i++) {
    if (Number.isNaN(values[i])) continue
    sum += values[i]!
    count++
  }
  return count ? sum / count : null
}
