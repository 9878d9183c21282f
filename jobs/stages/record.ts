import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { Flag, Regime } from '../../shared/measurement'
import type { ChannelMapping, RecordFacts } from '../../shared/records'
import { pyramidName, type SourceFile } from '../../shared/stageOutputs'
import { readRecord } from '../formats/readRecord'
import { RecordError } from '../formats/recordError'
import { plannedFrequencies } from '../queue/inputs'
import { buildPyramid } from '../signal/envelope'
import { findRegimes } from '../signal/regimes'
import { openFileSource } from './fileSource'
import { sourceOf } from './inputs'
import { defineStage, StageError, type StageHelpers } from './stage'

interface Payload {
  source: SourceFile
  path: string
  mapping: ChannelMapping | null
  plannedFrequenciesHz: number[]
}

/** What the illumination channel holds; kept beside the channels for the stages that cut. */
export interface RecordRegimes {
  regimes: Regime[]
  darkLevel: number | null
}

/** Mistakes that a person mends by saying which column is which. */
const mappingCodes = new Set(['no-illumination', 'unknown-column', 'no-time', 'ambiguous-columns', 'sensitivity-not-volts', 'rates-differ', 'starts-differ', 'clock-times'])

/** Reads the DAQ file once: channels as float32 columns with their pyramids of extremes, and the regimes of the lamp. */
export const record = defineStage<Payload>({
  load({ record: upload, acquisition }, store) {
    const source = sourceOf(upload, 'record')
    return { source, path: store.localPath(source.fileKey), mapping: acquisition.channels, plannedFrequenciesHz: plannedFrequencies(acquisition) }
  },

  async run({ source, path, mapping, plannedFrequenciesHz }, helpers) {
    const { channels, sampleRateHz, startSeconds, flags } = await read(path, source, mapping, helpers)
    const files: Record<string, string> = {}
    for (const channel of channels) {
      files[channel.role] = join(helpers.workDir, `${channel.role}.f32`)
      await writeFile(files[channel.role]!, bytesOf(channel.data))
      files[pyramidName(channel.role)] = join(helpers.workDir, pyramidName(channel.role))
      await writeFile(files[pyramidName(channel.role)]!, bytesOf(buildPyramid(channel.data).pairs))
    }
    const illumination = channels.find(channel => channel.role === 'illumination')!
    const found = findRegimes(illumination.data, sampleRateHz, { plannedFrequenciesHz })
    files.regimes = join(helpers.workDir, 'regimes.json')
    await writeFile(files.regimes, JSON.stringify({ regimes: found.regimes, darkLevel: found.darkLevel } satisfies RecordRegimes))
    const facts: RecordFacts = {
      sampleRateHz, startSeconds, samples: illumination.data.length, durationSeconds: illumination.data.length / sampleRateHz,
      channels: channels.map(({ role, name, unit, data }) => ({ role, name, unit, ...extremes(data) })),
    }
    const all: Flag[] = [...flags, ...found.flags].map(flag => ({ ...flag, stage: 'record' }))
    return {
      state: 'done',
      message: `${channels.length} channels, ${Number(facts.durationSeconds.toFixed(2))} s at ${Number(sampleRateHz.toFixed(3))} Hz, ${found.regimes.length} regimes.`,
      facts: { source, record: facts, darkLevel: found.darkLevel }, files, flags: all,
    }
  },
})

async function read(path: string, source: SourceFile, mapping: ChannelMapping | null, { signal, progress }: StageHelpers) {
  const file = openFileSource(path, (offset) => {
    signal.throwIfAborted()
    progress({ progress: 0.8 * offset / source.bytes })
  })
  try {
    const { columns = {}, sampleRateHz, units, sensitivities } = mapping ?? {}
    return await readRecord(file, { filename: source.filename, columns, sampleRateHz, units, sensitivities })
  } catch (error) {
    if (error instanceof RecordError && mappingCodes.has(error.code)) throw new StageError(error.code, error.message, { review: true, cause: error })
    throw error
  } finally {
    file.close()
  }
}

const bytesOf = (data: Float32Array) => new Uint8Array(data.buffer, data.byteOffset, data.byteLength)

function extremes(data: Float32Array): { minimum: number, maximum: number } {
  let minimum = Infinity
  let maximum = -Infinity
  for (const value of data) {
    if (value < minimum) minimum = value
    if (value > maximum) maximum = value
  }
  return { minimum, maximum }
}
