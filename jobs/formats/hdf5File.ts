import type { File } from 'h5wasm'
import { chunksOf, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'

/** The part of Emscripten's file system that is used here. */
interface EmscriptenFs {
  createFile: (parent: string, name: string, properties: object, canRead: boolean, canWrite: boolean) => FsNode
  getStream: (descriptor: number) => { tty?: { ops: { put_char: (tty: unknown, code: number | null) => void } } } | undefined
  unlink: (path: string) => void
}

interface FsNode {
  usedBytes: number
  contents: Uint8Array
  stream_ops: Record<string, unknown>
}

export interface Hdf5File {
  file: File
  close: () => void
}

/** Larger files are not held in memory when their source cannot be read in slices. */
const largestInMemory = 512 * 2 ** 20
const longestComplaint = 20_000
let opened = 0
let complaints = ''

/** The library is 4 MB of WebAssembly: it is loaded when the first HDF5 file is opened. */
async function loadLibrary() {
  const { default: h5wasm } = await import('h5wasm')
  const { FS } = await h5wasm.ready as unknown as { FS: EmscriptenFs }
  const terminal = FS.getStream(2)?.tty
  // HDF5 writes its error stack to the terminal; it is kept to say what is wrong.
  if (terminal) terminal.ops = { ...terminal.ops, put_char: (_, code) => keepComplaint(code) }
  return { h5wasm, FS }
}

function keepComplaint(code: number | null): void {
  if (code !== null && complaints.length < longestComplaint) complaints += String.fromCharCode(code)
}

/**
 * Open an HDF5 file for reading, in slices when the source can be read without waiting, else from memory.
 *
 * Links to other files lead nowhere: the library only sees this one file.
 *
 * @throws RecordError `hdf5-damaged`, `hdf5-too-large`
 */
export async function openHdf5File(source: RandomAccess): Promise<Hdf5File> {
  const { h5wasm, FS } = await loadLibrary()
  const name = `record-${opened++}.h5`
  const { readSync } = source
  if (!readSync && source.size > largestInMemory) throw new RecordError('hdf5-too-large', `The HDF5 file has ${Math.round(source.size / 2 ** 20)} MiB, more than the 512 MiB that are read from here. Export the wanted channels alone.`)
  const contents = readSync ? null : await wholeOf(source)
  const read = readSync ?? ((offset: number, length: number) => contents!.subarray(offset, offset + length))
  const node = FS.createFile('/', name, {}, true, false)
  node.usedBytes = source.size
  node.stream_ops = {
    ...node.stream_ops,
    read: (_: unknown, buffer: Uint8Array, offset: number, length: number, position: number) => {
      const bytes = position >= source.size ? new Uint8Array(0) : read(position, Math.min(length, source.size - position))
      buffer.set(bytes, offset)
      return bytes.length
    },
  }
  complaints = ''
  const file = new h5wasm.File(`/${name}`, 'r')
  const close = () => {
    if (file.file_id > 0n) file.close()
    FS.unlink(`/${name}`)
  }
  if (file.file_id > 0n) return { file, close }
  close()
  throw new RecordError('hdf5-damaged', `The HDF5 file cannot be opened: ${lastComplaint()}. Copy it again from the DAQ PC, and close it there first.`)
}

/** What HDF5 said last, deepest: "truncated file: eof = …". */
export function lastComplaint(): string {
  const all = [...complaints.matchAll(/#\d+: .* in \w+\(\): (.*)/g)].map(([, text]) => text)
  complaints = ''
  return all.find(text => text.includes('truncated')) ?? all.findLast(text => !/identifier|VOL|get value/.test(text)) ?? 'its structure is damaged'
}

async function wholeOf(source: RandomAccess): Promise<Uint8Array> {
  const all = new Uint8Array(source.size)
  let at = 0
  for await (const chunk of chunksOf(source)) {
    all.set(chunk, at)
    at += chunk.length
  }
  return all
}
