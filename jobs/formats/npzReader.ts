import { NpyError, readNpy, readNpyHeader, type NpyArray, type NpyHeader } from './npy'

/** Reads `length` bytes of a file from `offset`. */
export type ReadRange = (offset: number, length: number) => Promise<Uint8Array>

export interface NpzReader {
  names: string[]
  /** One whole array. */
  array: (name: string) => Promise<NpyArray>
  /** Type and shape of an array, and where in the *archive* its data begin, to read a part of them. */
  locate: (name: string) => Promise<NpyHeader>
}

interface Entry {
  offset: number
  bytes: number
}

const endBytes = 22
const locatorBytes = 20
const localBytes = 30
/** Longest header read at once; NPY 1.0 headers of plain arrays are 128 bytes. */
const npyHeaderBytes = 4096

/**
 * Open an NPZ file of stored members without reading it whole.
 *
 * @param size bytes of the file
 * @throws NpyError for what is not such a file (compressed members included)
 */
export async function openNpz(size: number, read: ReadRange): Promise<NpzReader> {
  const directory = await findDirectory(size, read)
  const entries = readDirectory(directory.bytes, directory.count)
  const start = async (name: string) => {
    const entry = entries.get(name)
    if (!entry) throw new NpyError(`The archive holds no array “${name}”, only ${[...entries.keys()].join(', ')}.`)
    const header = viewOf(await read(entry.offset, localBytes))
    if (header.getUint32(0, true) !== 0x04034b50) throw new NpyError(`The archive is damaged at array “${name}”.`)
    return { bytes: entry.bytes, offset: entry.offset + localBytes + header.getUint16(26, true) + header.getUint16(28, true) }
  }
  return {
    names: [...entries.keys()],
    async array(name) {
      const { offset, bytes } = await start(name)
      return readNpy(await read(offset, bytes))
    },
    async locate(name) {
      const { offset, bytes } = await start(name)
      const header = readNpyHeader(await read(offset, Math.min(bytes, npyHeaderBytes)))
      return { ...header, dataOffset: offset + header.dataOffset }
    },
  }
}

/** All arrays of an NPZ file in memory. @throws NpyError as `openNpz` */
export function readNpz(bytes: Uint8Array): Record<string, NpyArray> {
  const view = viewOf(bytes)
  const end = parseEnd(bytes.subarray(Math.max(0, bytes.length - endBytes - locatorBytes)))
  const large = end.locatorOffset === null ? null : parseEnd64(bytes.subarray(end.locatorOffset))
  const { offset, length, count } = large ?? end
  const arrays: Record<string, NpyArray> = {}
  for (const [name, entry] of readDirectory(bytes.subarray(offset, offset + length), count)) {
    const from = entry.offset + localBytes + view.getUint16(entry.offset + 26, true) + view.getUint16(entry.offset + 28, true)
    arrays[name] = readNpy(bytes.subarray(from, from + entry.bytes))
  }
  return arrays
}

async function findDirectory(size: number, read: ReadRange): Promise<{ bytes: Uint8Array, count: number }> {
  const tail = Math.min(size, endBytes + locatorBytes)
  const end = parseEnd(await read(size - tail, tail))
  const { offset, length, count } = end.locatorOffset === null ? end : parseEnd64(await read(end.locatorOffset, 56))
  return { bytes: await read(offset, length), count }
}

function parseEnd(tail: Uint8Array) {
  const at = tail.length - endBytes
  const view = viewOf(tail)
  if (at < 0 || view.getUint32(at, true) !== 0x06054b50) throw new NpyError('This is not an NPZ file, or it ends early. Make it again.')
  const locatorAt = at - locatorBytes
  const hasLocator = locatorAt >= 0 && view.getUint32(locatorAt, true) === 0x07064b50
  return {
    count: view.getUint16(at + 10, true), length: view.getUint32(at + 12, true), offset: view.getUint32(at + 16, true),
    locatorOffset: hasLocator ? Number(view.getBigUint64(locatorAt + 8, true)) : null,
  }
}

function parseEnd64(bytes: Uint8Array) {
  const view = viewOf(bytes)
  if (bytes.length < 56 || view.getUint32(0, true) !== 0x06064b50) throw new NpyError('The archive’s directory is damaged. Make it again.')
  return { count: Number(view.getBigUint64(32, true)), length: Number(view.getBigUint64(40, true)), offset: Number(view.getBigUint64(48, true)) }
}

function readDirectory(bytes: Uint8Array, count: number): Map<string, Entry> {
  const view = viewOf(bytes)
  const entries = new Map<string, Entry>()
  let at = 0
  for (let i = 0; i < count; i++) {
    if (at + 46 > bytes.length || view.getUint32(at, true) !== 0x02014b50) throw new NpyError('The archive’s directory is damaged. Make it again.')
    if (view.getUint16(at + 10, true) !== 0) throw new NpyError('The archive is compressed. Only stored archives can be read here.')
    const [nameBytes, extraBytes, commentBytes] = [28, 30, 32].map(field => view.getUint16(at + field, true))
    const name = new TextDecoder().decode(bytes.subarray(at + 46, at + 46 + nameBytes))
    const entry = { bytes: view.getUint32(at + 24, true), offset: view.getUint32(at + 42, true) }
    applyZip64(entry, viewOf(bytes.subarray(at + 46 + nameBytes, at + 46 + nameBytes + extraBytes)))
    entries.set(name.replace(/\.npy$/, ''), entry)
    at += 46 + nameBytes + extraBytes + commentBytes
  }
  return entries
}

/** The 64-bit extra field holds, in order, only those values that do not fit their 32-bit field. */
function applyZip64(entry: Entry, extra: DataView): void {
  for (let at = 0; at + 4 <= extra.byteLength; at += 4 + extra.getUint16(at + 2, true)) {
    if (extra.getUint16(at, true) !== 1) continue
    let field = at + 4
    // Sizes stored and original are equal here, and both overflow together.
    if (entry.bytes === 0xffffffff) {
      entry.bytes = Number(extra.getBigUint64(field, true))
      field += 16
    }
    if (entry.offset === 0xffffffff) entry.offset = Number(extra.getBigUint64(field, true))
  }
}

const viewOf = (bytes: Uint8Array) => new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
