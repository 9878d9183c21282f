import { createHash } from 'node:crypto'
import { open, type FileHandle } from 'node:fs/promises'
import { crc32 } from 'node:zlib'
import { npyData, npyDataBytes, writeNpyHeader, type Dtype, type NpyArray } from '../formats/npy'
import { centralDirectory, localHeader, type ZipMember } from '../formats/zipRecords'
import type { SolvedOffsets, SumSource } from './solveTasks'
import { StageError } from './stage'

const chunkBytes = 1 << 20

export interface SetArrays {
  /** Sums of the groups, [G, H, W] uint32, each in its source; `crc` over NPY header and data, see `crcOfMember`. */
  sums: { shape: [number, number, number], sources: SumSource[], crc: number }
  /** Everything that fits into memory, in the order of the file. */
  small: Record<string, NpyArray>
}

export interface WrittenFile {
  bytes: number
  sha256: string
}

interface Placed {
  member: ZipMember
  npyHeader: Uint8Array
  dataOffset: number
}

/**
 * Writes `frameset.npz`, never holding more than a chunk of it: sums are copied from their sources while other threads
 * write the solved images to their places. The same content gives the same bytes, whoever writes what when.
 *
 * @param solve writes the images at these offsets of the file
 * @throws Error when the sums do not have the checksum they should
 */
export async function writeSetFile(path: string, { sums, small }: SetArrays, solve: (offsets: SolvedOffsets) => Promise<void>): Promise<WrittenFile> {
  const [, height, width] = sums.shape
  const solved = ['scene', 'p', 'q', 'noise'] as const
  const layout = planLayout({ sums: { dtype: 'uint32', shape: sums.shape }, ...small, ...Object.fromEntries(solved.map(name => [name, { dtype: 'float32' as const, shape: [height, width] }])) })
  const file = await open(path, 'w+')
  try {
    await file.truncate(layout.end)
    const writer = new HashedWriter(file)
    const offset = (name: string) => layout.members.get(name)!.dataOffset
    const solving = solve({ scene: offset('scene'), p: offset('p'), q: offset('q'), noise: offset('noise') })
    const copying = copySums(writer, layout.members.get('sums')!, sums)
    await Promise.all([solving, copying])
    // To the disk while checksums are taken, so that storing the file later waits for little.
    const syncing = file.datasync()
    syncing.catch(() => {})
    for (const [name, array] of Object.entries(small)) await writeSmall(writer, layout.members.get(name)!, array)
    for (const name of solved) await takeIn(writer, layout.members.get(name)!, file)
    await writer.write(centralDirectory([...layout.members.values()].map(({ member }) => member), layout.end))
    await syncing
    return { bytes: writer.position, sha256: writer.digest() }
  } finally {
    await file.close()
  }
}

function planLayout(arrays: Record<string, { dtype: Dtype, shape: number[] }>): { members: Map<string, Placed>, end: number } {
  const members = new Map<string, Placed>()
  let offset = 0
  for (const [name, { dtype, shape }] of Object.entries(arrays)) {
    const npyHeader = writeNpyHeader(dtype, shape)
    const member: ZipMember = { name: `${name}.npy`, bytes: npyHeader.length + npyDataBytes(dtype, shape), crc: 0, offset }
    const dataOffset = offset + localHeader(member).length + npyHeader.length
    members.set(name, { member, npyHeader, dataOffset })
    offset = dataOffset + npyDataBytes(dtype, shape)
  }
  return { members, end: offset }
}

/** Writes from the beginning on and hashes what it writes. */
class HashedWriter {
  position = 0
  private readonly hash = createHash('sha256')
  constructor(private readonly file: FileHandle) {}

  async write(bytes: Uint8Array): Promise<void> {
    const writing = this.file.write(bytes, 0, bytes.length, this.position)
    this.pass(bytes)
    const { bytesWritten } = await writing
    if (bytesWritten !== bytes.length) throw Object.assign(new Error('The disk took only a part of a frame set'), { code: 'ENOSPC' })
  }

  /** Bytes that are in the file already. */
  pass(bytes: Uint8Array): void {
    this.hash.update(bytes)
    this.position += bytes.length
  }

  digest = () => this.hash.digest('hex')
}

async function copySums(writer: HashedWriter, { member, npyHeader }: Placed, { sources, crc, shape }: SetArrays['sums']): Promise<void> {
  member.crc = crc
  await writer.write(localHeader(member))
  await writer.write(npyHeader)
  let seen = crc32(npyHeader)
  for (const source of sources) {
    for await (const chunk of chunksOf(source, shape[1] * shape[2] * 4)) {
      seen = crc32(chunk, seen)
      await writer.write(chunk)
    }
  }
  if (seen !== crc) throw new StageError('sums-damaged', 'The stored sums of this line are not what they were. Run the acquisition again from the sum stage.')
}

async function writeSmall(writer: HashedWriter, { member, npyHeader }: Placed, array: NpyArray): Promise<void> {
  const data = npyData(array)
  member.crc = crc32(data, crc32(npyHeader))
  await writer.write(localHeader(member))
  await writer.write(npyHeader)
  await writer.write(data)
}

/** Data that others have written to their place: checksum, headers before them, hash over all. */
async function takeIn(writer: HashedWriter, { member, npyHeader, dataOffset }: Placed, file: FileHandle): Promise<void> {
  const bytes = member.bytes - npyHeader.length
  member.crc = crc32(npyHeader)
  for await (const chunk of chunksIn(file, dataOffset, bytes)) member.crc = crc32(chunk, member.crc)
  await writer.write(localHeader(member))
  await writer.write(npyHeader)
  for await (const chunk of chunksIn(file, dataOffset, bytes)) writer.pass(chunk)
}

async function* chunksOf({ path, offset }: SumSource, bytes: number): AsyncGenerator<Uint8Array> {
  const file = await open(path, 'r')
  try {
    yield* chunksIn(file, offset, bytes)
  } finally {
    await file.close()
  }
}

/** The chunk's memory is used again for the next one. */
async function* chunksIn(file: FileHandle, offset: number, bytes: number): AsyncGenerator<Uint8Array> {
  const buffer = new Uint8Array(Math.min(chunkBytes, bytes))
  for (let done = 0; done < bytes;) {
    const { bytesRead } = await file.read(buffer, 0, Math.min(buffer.length, bytes - done), offset + done)
    if (!bytesRead) throw new Error('A file of sums is shorter than its picture')
    yield buffer.subarray(0, bytesRead)
    done += bytesRead
  }
}
