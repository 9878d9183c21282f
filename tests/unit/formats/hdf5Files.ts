import h5wasm, { type File } from 'h5wasm'

let made = 0

/** The bytes of an HDF5 file that the library itself writes. */
export async function hdf5Bytes(fill: (file: File) => void): Promise<Uint8Array> {
  const { FS } = await h5wasm.ready as unknown as { FS: { readFile: (path: string) => Uint8Array, unlink: (path: string) => void } }
  const path = `/made-${made++}.h5`
  const file = new h5wasm.File(path, 'w')
  fill(file)
  file.flush()
  file.close()
  const bytes = FS.readFile(path)
  FS.unlink(path)
  return bytes
}
