import { buffer } from 'node:stream/consumers'
import { openNpz, type NpzReader } from '../../jobs/formats/npzReader'
import type { NpyHeader } from '../../jobs/formats/npy'
import { LampsumError } from '#shared/errors'
import type { Database } from '../db/client'
import type { FileStore } from '../store/fileStore'
import type { Download } from './fileDownload'
import { cachingOf, findFrameSetFile } from './frameSetFiles'
import { recentlyUsed } from './recentlyUsed'

const solvedImages = ['scene', 'p', 'q', 'noise']
const directories = recentlyUsed<NpzReader>(50)

/** One image out of frameset.npz: a solved one by its name, or a group's sums by the group's id. Only its own bytes are read. */
export async function frameSetImage(database: Database, store: FileStore, frameSetId: string, name: string): Promise<Download> {
  const { file, state, groups } = await findFrameSetFile(database, frameSetId, 'frameset.npz')
  const npz = await directories(file.fileKey, () => openNpz(file.bytes, (offset, length) => readRange(store, file.fileKey, offset, length)))
  const solved = solvedImages.includes(name)
  const index = solved ? 0 : groups.findIndex(group => group.id === name)
  const member = solved ? name : 'sums'
  if (index < 0 || !npz.names.includes(member)) throw new LampsumError('not-found', `There is no image “${name}”. Ask for scene, p, q, noise or the id of a group.`)
  const array = await npz.locate(member)
  const { rows, columns } = imageShape(array, solved ? null : groups.length)
  const bytes = rows * columns * 4
  const start = array.dataOffset + index * bytes
  return {
    bytes, contentType: 'application/octet-stream', tag: `${file.sha256}-${encodeURIComponent(name)}`,
    headers: { ...cachingOf(state), 'x-lampsum-shape': `${rows},${columns}`, 'x-lampsum-type': array.dtype },
    open: range => store.openRange(file.fileKey, { start: start + range.start, end: start + range.end }),
  }
}

/** [H, W], or [G, H, W] with as many groups as the set has. */
function imageShape({ shape, dtype }: NpyHeader, groups: number | null): { rows: number, columns: number } {
  const [rows, columns] = shape.slice(-2)
  const fits = groups === null ? shape.length === 2 && dtype === 'float32' : shape.length === 3 && shape[0] === groups && dtype === 'uint32'
  if (!fits || !rows || !columns) throw new Error(`frameset.npz holds ${dtype} of shape (${shape.join(', ')}), which does not fit its frame set.`)
  return { rows, columns }
}

const readRange = (store: FileStore, key: string, offset: number, length: number) => buffer(store.openRange(key, { start: offset, end: offset + length - 1 }))
