/** NPZ: a ZIP archive of NPY files, stored without compression, the same bytes on every run. */
import { crc32 } from './crc32'
import { assertShape, npyData, npyDataBytes, writeNpyHeader, type Dtype, type NpyArray } from './npy'
import { centralDirectory, localHeader, type ZipMember } from './zipRecords'

export { openNpz, readNpz, type NpzReader, type ReadRange } from './npzReader'

/** An array that is not in memory at once. `chunks` is called twice (checksum, then data) and must repeat itself. */
export interface LazyNpyArray {
  dtype: Dtype
  shape: number[]
  chunks: () => Iterable<Uint8Array> | AsyncIterable<Uint8Array>
}

interface Options {
  /** Write the 64-bit records even where they are not needed. */
  zip64?: boolean
}

/**
 * Bytes of an NPZ file, chunk by chunk, so that a set larger than memory can be written.
 *
 * @param arrays name → array; members appear in this order as `<name>.npy`
 * @throws NpyError when an array's data do not fit its shape
 */
export async function* npzChunks(arrays: Record<string, NpyArray | LazyNpyArray>, { zip64 = false }: Options = {}): AsyncGenerator<Uint8Array> {
  const members: ZipMember[] = []
  let offset = 0
  for (const [name, array] of Object.entries(arrays)) {
    const lazy = 'chunks' in array ? array : inMemory(array)
    const npyHeader = writeNpyHeader(lazy.dtype, lazy.shape)
    const dataBytes = npyDataBytes(lazy.dtype, lazy.shape)
    const member: ZipMember = { name: `${name}.npy`, bytes: npyHeader.length + dataBytes, crc: crc32(npyHeader), offset }
    for await (const chunk of exactly(lazy, dataBytes, name)) member.crc = crc32(chunk, member.crc)
    const header = localHeader(member, zip64)
    yield header
    yield npyHeader
    yield* exactly(lazy, dataBytes, name)
    members.push(member)
    offset += header.length + member.bytes
  }
  yield centralDirectory(members, offset, zip64)
}

function inMemory(array: NpyArray): LazyNpyArray {
  assertShape(array)
  return { ...array, chunks: () => [npyData(array)] }
}

async function* exactly({ chunks }: LazyNpyArray, bytes: number, name: string): AsyncGenerator<Uint8Array> {
  let seen = 0
  for await (const chunk of chunks()) {
    seen += chunk.length
    yield chunk
  }
  if (seen !== bytes) throw new RangeError(`Array “${name}” gave ${seen} bytes of the ${bytes} that its shape needs.`)
}

/** A whole NPZ file in memory. Use `npzChunks` for large sets. */
export function writeNpz(arrays: Record<string, NpyArray>, { zip64 = false }: Options = {}): Uint8Array {
  const members: ZipMember[] = []
  const parts: Uint8Array[] = []
  let offset = 0
  for (const [name, array] of Object.entries(arrays)) {
    assertShape(array)
    const npyHeader = writeNpyHeader(array.dtype, array.shape)
    const data = npyData(array)
    const member: ZipMember = { name: `${name}.npy`, bytes: npyHeader.length + data.length, crc: crc32(data, crc32(npyHeader)), offset }
    const header = localHeader(member, zip64)
    parts.push(header, npyHeader, data)
    members.push(member)
    offset += header.length + member.bytes
  }
  parts.push(centralDirectory(members, offset, zip64))
  const bytes = new Uint8Array(parts.reduce((sum, part) => sum + part.length, 0))
  let at = 0
  for (const part of parts) {
    bytes.set(part, at)
    at += part.length
  }
  return bytes
}
