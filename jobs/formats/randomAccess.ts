import { RecordError } from './recordError'

/** A file of known size, read in pieces at any place: a disk file, a stored object, a `Blob`. */
export interface RandomAccess {
  /** Bytes of the whole. */
  size: number
  /** `length` bytes from `offset`; fewer only where the file ends. The bytes may be overwritten by the next call. */
  read: (offset: number, length: number) => Promise<Uint8Array>
  /** The same without waiting, where there is such a way: lets HDF5 be read in slices instead of whole. */
  readSync?: (offset: number, length: number) => Uint8Array
}

const pieceBytes = 1 << 20

/** Bytes in memory as a file. */
export function memorySource(bytes: Uint8Array): RandomAccess {
  const readSync = (offset: number, length: number) => bytes.subarray(offset, Math.min(bytes.length, offset + length))
  return { size: bytes.length, readSync, read: (offset, length) => Promise.resolve(readSync(offset, length)) }
}

/** @throws RecordError `file-cut` naming the byte where the file ends too early */
export async function readExactly(source: RandomAccess, offset: number, length: number, what: string): Promise<Uint8Array> {
  const bytes = offset >= source.size ? new Uint8Array(0) : await source.read(offset, length)
  if (bytes.length < length) throw new RecordError('file-cut', `The file ends at byte ${offset + bytes.length}, within ${what} that begins at byte ${offset} and needs ${length} bytes. Copy the file again from the DAQ PC.`)
  return bytes
}

/** The bytes between two offsets, in order, in pieces of at most 1 MiB. */
export async function* chunksOf(source: RandomAccess, from = 0, to = source.size): AsyncGenerator<Uint8Array> {
  for (let at = from; at < to;) {
    const piece = await source.read(at, Math.min(pieceBytes, to - at))
    if (piece.length === 0) return
    at += piece.length
    yield piece
  }
}

export const viewOf = (bytes: Uint8Array): DataView => new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)

/** ASCII text of some bytes; others than ASCII as Latin-1. */
export const latin1 = (bytes: Uint8Array): string => Array.from(bytes, byte => String.fromCharCode(byte)).join('')
