import { createReadStream } from 'node:fs'
import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { Flag, Regime } from '../../shared/measurement'
import type { ChannelMapping, RecordFacts } from '../../shared/records'
import type { SourceFile } from '../../shared/stageOutputs'
import { readCsvRecord, RecordError } from '../formats/recordCsv'
import { plannedFrequencies } from '../queue/inputs'
import { findRegimes } from '../signal/regimes'
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
const mappingCodes = new Set(['no-illumination', 'unknown-column', 'no-time', 'ambiguous-columns'])

/** Reads the DAQ file once: channels as float32 columns, and the regimes of the lamp. */
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
      await writeFile(files[channel.role]!, new Uint8Array(channel.data.buffer, channel.data.byteOffset, channel.data.byteLength))
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
  let bytes = 0
  async function* chunks() {
    for await (const chunk of createReadStream(path, { signal, highWaterMark: 1 << 20 })) {
      bytes += (chunk as Buffer).length
      progress({ progress: 0.8 * bytes / source.bytes })
      yield chunk as Uint8Array
    }
  }
  try {
    return await readCsvRecord(chunks(), { columns: mapping?.columns ?? {}, sampleRateHz: mapping?.sampleRateHz, units: mapping?.units })
  } catch (error) {
    if (error instanceof RecordError && mappingCodes.has(error.code)) throw new StageError(error.code, error.message, { review: true, cause: error })
    throw error
  }
}

function extremes(data: Float32Array): { minimum: number, maximum: number } {
  let minimum = Infinity
  let maximum = -Infinity
  for (const value of data) {
    if (value < minimum) minimum = value
    if (value > maximum) maximum = value
  }
  return { minimum, maximum }
}
