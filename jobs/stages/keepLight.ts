import { and, eq } from 'drizzle-orm'
import type { Transaction } from '../../server/db/client'
import { stageOutputs } from '../../server/db/schema'
import type { Situation } from '../queue/inputs'

/**
 * The light of every frame belongs to the clip, whichever stage happened to decode it: it is kept with the meter stage's
 * output, as its file “light”, and taken out of the files of the stage that made it.
 */
export async function keepLight(transaction: Transaction, { acquisition, outputs }: Situation, keys: Record<string, string>): Promise<void> {
  const { light } = keys
  if (!light || !outputs.meter) return
  delete keys.light
  const ofClip = and(eq(stageOutputs.acquisitionId, acquisition.id), eq(stageOutputs.stage, 'meter'), eq(stageOutputs.inputsKey, outputs.meter.inputsKey))
  await transaction.update(stageOutputs).set({ files: { ...outputs.meter.files, light } }).where(ofClip)
}
