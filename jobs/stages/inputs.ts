import { readFile } from 'node:fs/promises'
import type { FileStore } from '../../server/store/fileStore'
import type { FactsOf, SourceFile } from '../../shared/stageOutputs'
import type { PipelineStage } from '../../shared/states'
import { readNpy } from '../formats/npy'
import type { Situation, UploadRow } from '../queue/inputs'
import { StageError } from './stage'

/** The stored upload that a stage reads. */
export function sourceOf(upload: UploadRow | null, what: 'clip' | 'record'): SourceFile {
  if (!upload?.fileKey || !upload.sha256) throw new StageError('source-missing', `The ${what} is missing. Upload it, then process the acquisition.`)
  return { uploadId: upload.id, fileKey: upload.fileKey, filename: upload.filename, bytes: upload.bytes, sha256: upload.sha256 }
}

export function factsOf<S extends PipelineStage>(situation: Situation, stage: S): FactsOf<S> {
  const output = situation.outputs[stage]
  if (!output) throw new StageError('output-missing', `The ${stage} stage has no result. Run it again from there.`)
  return output.facts as unknown as FactsOf<S>
}

/** Local path of a file that an earlier stage left. */
export function pathOf(situation: Situation, store: FileStore, stage: PipelineStage, name: string): string {
  const key = situation.outputs[stage]?.files[name]
  if (!key) throw new StageError('output-missing', `The ${stage} stage left no “${name}”. Run it again from there.`)
  return store.localPath(key)
}

export async function readFloat64(path: string): Promise<Float64Array> {
  const { data } = readNpy(await readFile(path))
  if (!(data instanceof Float64Array)) throw new TypeError(`${path} does not hold float64`)
  return data
}

/** Raw little-endian float32, as the record stage leaves a channel. */
export async function readFloat32(path: string): Promise<Float32Array> {
  const bytes = await readFile(path)
  return new Float32Array(bytes.buffer, bytes.byteOffset, bytes.byteLength / 4)
}

export const exposureOf = (situation: Situation) => situation.acquisition.frameExposureSeconds ?? 1 / factsOf(situation, 'inspect').clip.frameRateHz
