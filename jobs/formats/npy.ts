/** The NPY array file, version 1.0, as numpy's `numpy.lib.format` documents it. Little-endian hosts only. */

export type Dtype = 'uint8' | 'int32' | 'uint32' | 'float32' | 'float64' | 'complex64' | 'complex128'

/** Row-major (C order); shape [] is a scalar. Complex data lie as re, im, re, im … */
export type NpyArray
  = | { dtype: 'uint8', shape: number[], data: Uint8Array }
    | { dtype: 'int32', shape: number[], data: Int32Array }
    | { dtype: 'uint32', shape: number[], data: Uint32Array }
    | { dtype: 'float32' | 'complex64', shape: number[], data: Float32Array }
    | { dtype: 'float64' | 'complex128', shape: number[], data: Float64Array }

/** What a header says; `dataOffset` bytes lie before the data. */
export interface NpyHeader {
  dtype: Dtype
  shape: number[]
  dataOffset: number
  dataBytes: number
}

export class NpyError extends Error {
  override name = 'NpyError'
}

const dtypes = {
  uint8: { code: '|u1', itemBytes: 1, array: Uint8Array },
  int32: { code: '<i4', itemBytes: 4, array: Int32Array },
  uint32: { code: '<u4', itemBytes: 4, array: Uint32Array },
  float32: { code: '<f4', itemBytes: 4, array: Float32Array },
  float64: { code: '<f8', itemBytes: 8, array: Float64Array },
  complex64: { code: '<c8', itemBytes: 8, array: Float32Array },
  complex128: { code: '<c16', itemBytes: 16, array: Float64Array },
} as const satisfies Record<Dtype, unknown>

const magic = [0x93, 0x4e, 0x55, 0x4d, 0x50, 0x59]
const alignment = 64

/** Bytes that an array of this type and shape needs, without header. */
export const npyDataBytes = (dtype: Dtype, shape: readonly number[]): number => shape.reduce((product, length) => product * length, dtypes[dtype].itemBytes)

/** Header bytes of an NPY 1.0 file in C order, padded so that the data start at a multiple of 64. */
export function writeNpyHeader(dtype: Dtype, shape: readonly number[]): Uint8Array {
  const tuple = shape.length === 1 ? `(${shape[0]},)` : `(${shape.join(', ')})`
  const text = `{'descr': '${dtypes[dtype].code}', 'fortran_order': False, 'shape': ${tuple}, }`
  const length = Math.ceil((magic.length + 4 + text.length + 1) / alignment) * alignment
  const header = new Uint8Array(length).fill(0x20)
  header.set(magic)
  header.set([1, 0, (length - 10) & 0xff, (length - 10) >> 8], magic.length)
  for (let i = 0; i < text.length; i++) header[10 + i] = text.charCodeAt(i)
  header[length - 1] = 0x0a
  return header
}

/** The array's own memory as bytes; no copy. */
export const npyData = ({ data }: NpyArray): Uint8Array => new Uint8Array(data.buffer, data.byteOffset, data.byteLength)

/** A whole NPY file. @throws NpyError when data and shape disagree */
export function writeNpy(array: NpyArray): Uint8Array {
  assertShape(array)
  const header = writeNpyHeader(array.dtype, array.shape)
  const bytes = new Uint8Array(header.length + array.data.byteLength)
  bytes.set(header)
  bytes.set(npyData(array), header.length)
  return bytes
}

/** @throws NpyError when the array does not hold as many items as its shape says */
export function assertShape({ dtype, shape, data }: NpyArray): void {
  const expected = npyDataBytes(dtype, shape)
  if (data.byteLength !== expected) throw new NpyError(`An array of ${dtype} and shape (${shape.join(', ')}) needs ${expected} bytes, not ${data.byteLength}.`)
}

/**
 * Read the header; versions 1.0 to 3.0.
 *
 * @param bytes the file's beginning, at least its whole header
 * @throws NpyError for what is not NPY, a type outside `Dtype`, or Fortran order in two or more dimensions
 */
export function readNpyHeader(bytes: Uint8Array): NpyHeader {
  if (bytes.length < 12 || magic.some((value, i) => bytes[i] !== value)) throw new NpyError('This is not an NPY file: it does not begin with \\x93NUMPY.')
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  const long = bytes[6] >= 2
  const start = long ? 12 : 10
  const end = start + (long ? view.getUint32(8, true) : view.getUint16(8, true))
  if (end > bytes.length) throw new NpyError('The NPY file ends within its header. Export it again.')
  const text = String.fromCharCode(...bytes.subarray(start, end))
  const code = /'descr':\s*'([^']*)'/.exec(text)?.[1]
  const shapeText = /'shape':\s*\(([^)]*)\)/.exec(text)?.[1]
  const dtype = (Object.keys(dtypes) as Dtype[]).find(name => dtypes[name].code === code)
  if (!dtype || shapeText === undefined) throw new NpyError(`The NPY type ${code ?? 'of a structured array'} is not supported. Export one of ${Object.values(dtypes).map(entry => entry.code).join(', ')}.`)
  const shape = shapeText.split(',').map(part => part.trim()).filter(Boolean).map(Number)
  if (/'fortran_order':\s*True/.test(text) && shape.length > 1) throw new NpyError('The NPY file is in Fortran order. Export it in C order.')
  return { dtype, shape, dataOffset: end, dataBytes: npyDataBytes(dtype, shape) }
}

/** Read a whole NPY file into an array of its own memory. @throws NpyError as `readNpyHeader`, or when data are missing */
export function readNpy(bytes: Uint8Array): NpyArray {
  const { dtype, shape, dataOffset, dataBytes } = readNpyHeader(bytes)
  if (bytes.length < dataOffset + dataBytes) throw new NpyError(`The NPY file holds ${bytes.length - dataOffset} of ${dataBytes} bytes of data. Export it again.`)
  // Not slice(): that of Node's Buffer shares the memory, at any alignment.
  const copy = new Uint8Array(dataBytes)
  copy.set(bytes.subarray(dataOffset, dataOffset + dataBytes))
  return { dtype, shape, data: new dtypes[dtype].array(copy.buffer) } as NpyArray
}
