import { readFile } from 'node:fs/promises'
import type { FileStore } from '../../server/store/fileStore'
import type { ClipFacts } from '../../shared/measurement'
import { decodeFrameIndex } from '../media/frameIndex'
import type { Situation } from '../queue/inputs'
import { factsOf, pathOf } from './inputs'
import type { ClipSource } from './sumFiles'

/** The clip as a payload names it. */
export interface ClipPaths {
  path: string
  clip: ClipFacts
  index: string
}

export function clipPathsOf(situation: Situation, store: FileStore): ClipPaths {
  const { source, clip } = factsOf(situation, 'inspect')
  return { path: store.localPath(source.fileKey), clip, index: pathOf(situation, store, 'inspect', 'frame-index') }
}

export async function openClip({ path, clip, index }: ClipPaths): Promise<ClipSource> {
  return { path, clip, index: decodeFrameIndex(await readFile(index)) }
}
