import { readFile } from 'node:fs/promises'
import type { FileStore } from '../../server/store/fileStore'
import type { ClipFacts, LampPatch } from '../../shared/measurement'
import { decodeFrameIndex } from '../media/frameIndex'
import type { Situation } from '../queue/inputs'
import { factsOf, pathOf } from './inputs'
import { StageError } from './stage'
import type { ClipSource } from './sumFiles'

/** The clip as a payload names it. */
export interface ClipPaths {
  path: string
  clip: ClipFacts
  index: string
  lampPatch: LampPatch | null
}

export function clipPathsOf(situation: Situation, store: FileStore): ClipPaths {
  const { source, clip } = factsOf(situation, 'inspect')
  return { path: store.localPath(source.fileKey), clip, index: pathOf(situation, store, 'inspect', 'frame-index'), lampPatch: situation.acquisition.lampPatch }
}

export async function openClip({ path, clip, index, lampPatch }: ClipPaths): Promise<ClipSource> {
  if (lampPatch && (lampPatch.left + lampPatch.width > clip.width || lampPatch.top + lampPatch.height > clip.height)) {
    throw new StageError('lamp-patch', `The lamp patch does not lie within the picture of ${clip.width}×${clip.height} pixels. Correct it in the acquisition’s settings.`)
  }
  return { path, clip, lampPatch, index: decodeFrameIndex(await readFile(index)) }
}
