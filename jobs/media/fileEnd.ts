import { open, type FileHandle } from 'node:fs/promises'
import { quickTimeEnd } from './quickTimeEnd'

/**
 * Whether a file ends where it says it should. `unknown`: its kind, or this one, does not say.
 * `expectedSeconds` is the length that the file states of itself where only its structure knows.
 */
export interface FileEnd {
  state: 'whole' | 'cut' | 'unknown'
  /** What is cut off, as the end of a sentence that begins with “The file ends”. */
  detail?: string
  expectedSeconds?: number
}

/** Bytes of a file at a position; fewer at its end. */
export type ReadAt = (position: number, length: number) => Promise<Buffer>

/** Look at a file's own sizes and end marks; a few kilobytes are read, nothing is decoded. */
export async function examineFileEnd(path: string, container: string): Promise<FileEnd> {
  const file = await open(path)
  try {
    const { size } = await file.stat()
    const names = container.split(',')
    const read = reader(file)
    if (names.includes('mov')) return await quickTimeEnd(read, size)
    if (names.includes('matroska')) return await matroskaEnd(read, size)
    if (names.includes('avi')) return await riffEnd(read, size)
    if (names.includes('mpegts')) return await transportEnd(read, size)
    if (names.includes('mpeg')) return await programEnd(read, size)
    return { state: 'unknown' }
  } finally {
    await file.close()
  }
}

function reader(file: FileHandle): ReadAt {
  return async (position, length) => {
    const { buffer, bytesRead } = await file.read(Buffer.alloc(length), 0, length, position)
    return buffer.subarray(0, bytesRead)
  }
}

/** Matroska (RFC 9559): the segment states its size, unless it was written live. */
async function matroskaEnd(read: ReadAt, size: number): Promise<FileEnd> {
  const head = await read(0, 64)
  const header = elementSize(head, 4)
  if (header === null) return { state: 'unknown' }
  const segment = header.bodyAt + header.size
  const bytes = await read(segment, 16)
  if (bytes.length < 12 || bytes.readUInt32BE(0) !== 0x18538067) return { state: 'unknown' }
  const body = elementSize(bytes, 4)
  if (body === null) return { state: 'unknown' }
  const end = segment + body.bodyAt + body.size
  return end > size ? { state: 'cut', detail: `${end - size} bytes before its segment does` } : { state: 'whole' }
}

/** A size of RFC 8794 at `at`; null when it is unknown (all ones) or nonsense. */
function elementSize(bytes: Buffer, at: number): { size: number, bodyAt: number } | null {
  const length = Math.clz32(bytes[at]) - 23
  if (length > 8 || at + length > bytes.length) return null
  let size = bytes[at] & (0xff >> length)
  let isUnknown = size === 0xff >> length
  for (let i = 1; i < length; i++) {
    size = size * 256 + bytes[at + i]
    isUnknown &&= bytes[at + i] === 0xff
  }
  return isUnknown ? null : { size, bodyAt: at + length }
}

/** AVI: one RIFF list, or several of the kind AVIX behind it (OpenDML). */
async function riffEnd(read: ReadAt, size: number): Promise<FileEnd> {
  let at = 0
  while (at + 8 <= size) {
    const head = await read(at, 8)
    if (head.toString('latin1', 0, 4) !== 'RIFF') break
    const length = head.readUInt32LE(4)
    if (length === 0 || length === 0xffffffff) return { state: 'unknown' }
    at += 8 + length + length % 2
  }
  // The pad byte at the very end may be missing.
  if (at === 0) return { state: 'unknown' }
  return at > size + 1 ? { state: 'cut', detail: `${at - size} bytes before its last list does` } : { state: 'whole' }
}

/** Transport streams (ISO/IEC 13818-1) have no end: only a broken last packet shows. */
async function transportEnd(read: ReadAt, size: number): Promise<FileEnd> {
  const head = await read(0, 1024)
  const packet = [[188, 0], [192, 4], [204, 0]].find(([length, first]) => [0, 1, 2, 3].every(i => head[first + i * length] === 0x47))
  if (!packet || size % packet[0] === 0) return { state: 'unknown' }
  return { state: 'cut', detail: `in the middle of a packet of ${packet[0]} bytes` }
}

/** Program streams (ISO/IEC 13818-1) may bear an end code; each packet states its length. */
async function programEnd(read: ReadAt, size: number): Promise<FileEnd> {
  const tail = await read(Math.max(0, size - (1 << 17)), 1 << 17)
  let last = tail.length - 1
  while (last > 3 && (tail[last] === 0 || tail[last] === 0xff)) last--
  if (last >= 3 && tail.readUInt32BE(last - 3) === 0x1b9) return { state: 'whole' }
  for (let at = tail.length - 6; at >= 0; at--) {
    const isPacket = tail[at] === 0 && tail[at + 1] === 0 && tail[at + 2] === 1 && tail[at + 3] >= 0xbd
    if (!isPacket) continue
    const missing = at + 6 + tail.readUInt16BE(at + 4) - tail.length
    return missing > 0 ? { state: 'cut', detail: `${missing} bytes before its last packet does` } : { state: 'unknown' }
  }
  return { state: 'unknown' }
}
