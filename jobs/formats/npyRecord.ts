import { splitUnit } from './csvLayout'
import { columnBlocks, fieldGetter, type ColumnPlace, type FieldType } from './fields'
import { latin1, readExactly, viewOf, type RandomAccess } from './randomAccess'
import { parsePythonLiteral, type PythonLiteral } from './pythonLiteral'
import { RecordError } from './recordError'
import type { RecordColumn, RecordTable } from './recordTable'

const magic = '\x93NUMPY'
const longestHeader = 1 << 20
/** More channels than any recorder has: then the array is an image or a stack of them. */
const mostChannels = 4096

interface Layout {
  rows: number
  columns: RecordColumn[]
  places: ColumnPlace[]
  text: string
  dataEnd: number
}

interface Field {
  name: string
  code: string
  offset: number
}

export const isNpy = (head: Uint8Array): boolean => latin1(head.subarray(0, 6)) === magic

/**
 * Open an NPY array file, versions 1.0 to 3.0 (numpy's `numpy.lib.format`), as a record.
 *
 * Integers of 1 to 8 bytes, floats of 2, 4 and 8, booleans, in either byte order. One dimension is one channel; two
 * dimensions are [samples, channels] or [channels, samples], the longer one being the samples, in C or Fortran order; a
 * one-dimensional structured array has a named channel per field. The file holds no sample rate.
 *
 * @throws RecordError `npy-header`, `npy-type`, `npy-shape`, `file-cut`
 */
export async function openNpy(source: RandomAccess): Promise<RecordTable> {
  const { descr, shape, isFortran, dataOffset } = await readHeader(source)
  const layout = typeof descr === 'string' ? plainLayout(descr, shape, isFortran, dataOffset) : structuredLayout(descr, shape, dataOffset)
  const { rows, columns, places, text, dataEnd } = layout
  if (dataEnd > source.size) throw new RecordError('file-cut', `The NPY file ends at byte ${source.size}, but an array of this type and shape (${shape.join(', ')}) ends at byte ${dataEnd}. Save or copy the file again.`)
  return {
    format: 'npy', description: `NPY, ${text}, shape (${shape.join(', ')})`, columns, rows, sampleRateHz: null, startSeconds: 0, flags: [],
    blocks: (wanted, from, to) => columnBlocks(source, wanted.map(index => places[index]), from, to),
  }
}

async function readHeader(source: RandomAccess) {
  const fixed = (await readExactly(source, 0, 12, 'the NPY header')).slice()
  const isLong = fixed[6] >= 2
  const start = isLong ? 12 : 10
  const length = isLong ? viewOf(fixed).getUint32(8, true) : viewOf(fixed).getUint16(8, true)
  if (fixed[6] < 1 || fixed[6] > 3 || length > longestHeader) throw new RecordError('npy-header', `The NPY header is of version ${fixed[6]} and ${length} bytes long; versions 1 to 3 of at most 1 MiB are read. Save the array again.`)
  const text = new TextDecoder(fixed[6] === 3 ? 'utf-8' : 'latin1').decode(await readExactly(source, start, length, 'the NPY header'))
  const header = parsePythonLiteral(text)
  const { descr, fortran_order: isFortran, shape } = header as Record<string, PythonLiteral> ?? {}
  const isWhole = (Array.isArray(descr) || typeof descr === 'string') && Array.isArray(shape) && shape.every(value => Number.isInteger(value) && (value as number) >= 0)
  if (!isWhole) throw new RecordError('npy-header', `The NPY header does not say type and shape; it reads “${text.trim().slice(0, 80)}”. Save the array again.`)
  return { descr, shape: shape as number[], isFortran: isFortran === true, dataOffset: start + length }
}

function plainLayout(code: string, shape: number[], isFortran: boolean, dataOffset: number): Layout {
  const type = typeOf(code)
  if (!type) throw unknownType(code)
  if (shape.length < 1 || shape.length > 2) throw new RecordError('npy-shape', `The NPY array has ${shape.length} dimensions. Save an array of shape (samples,), (samples, channels) or (channels, samples).`)
  const [first, second = 1] = shape
  const samplesFirst = first >= second
  const channels = Math.min(first, second)
  if (shape.length === 2 && channels > mostChannels) throw new RecordError('npy-shape', `The NPY array of shape (${shape.join(', ')}) would have ${channels} channels. Save an array of shape (samples, channels).`)
  const rows = shape.length === 1 ? first : Math.max(first, second)
  const count = shape.length === 1 ? 1 : channels
  const interleaved = samplesFirst !== isFortran
  const places = Array.from({ length: count }, (_, channel) => ({ type, offset: dataOffset + type.bytes * channel * (interleaved ? 1 : rows), strideBytes: type.bytes * (interleaved ? count : 1) }))
  const columns = places.map((_, index) => ({ index, name: `channel ${index + 1}`, header: '', unit: null }))
  return { rows, columns, places, text: nameOf(type), dataEnd: dataOffset + rows * count * type.bytes }
}

function structuredLayout(descr: PythonLiteral, shape: number[], dataOffset: number): Layout {
  const { fields, itemBytes } = readFields(descr as PythonLiteral[], '')
  if (shape.length !== 1) throw new RecordError('npy-shape', `The structured NPY array has ${shape.length} dimensions. Save it with one, the samples.`)
  const known = fields.flatMap(field => typeOf(field.code) ? [{ ...field, type: typeOf(field.code)! }] : [])
  if (!known.length) throw unknownType(fields.map(({ code }) => code).join(', '))
  const columns = known.map(({ name }, index) => ({ index, header: name, ...splitUnit(name) }))
  const places = known.map(({ type, offset }) => ({ type, offset: dataOffset + offset, strideBytes: itemBytes }))
  return { rows: shape[0], columns, places, text: `${known.length} fields`, dataEnd: dataOffset + shape[0] * itemBytes }
}

/** Fields of a structured type with their offsets; nested ones are named "outer.inner", parts of arrays "name[0]". */
function readFields(descr: PythonLiteral[], prefix: string): { fields: Field[], itemBytes: number } {
  const fields: Field[] = []
  let offset = 0
  for (const entry of descr) {
    const [label, code, shape = []] = entry as [PythonLiteral, PythonLiteral, (number | number[])?]
    const name = prefix + (Array.isArray(label) ? String(label[1]) : String(label))
    const count = [shape].flat().reduce((product, length) => product * length, 1)
    if (!(count + fields.length <= mostChannels)) throw new RecordError('npy-shape', `The structured NPY array has more than ${mostChannels} fields. Save the record’s channels alone.`)
    for (let i = 0; i < count; i++) {
      const part = [shape].flat().length ? `${name}[${i}]` : name
      if (Array.isArray(code)) {
        const inner = readFields(code, `${part}.`)
        fields.push(...inner.fields.map(field => ({ ...field, offset: field.offset + offset })))
        offset += inner.itemBytes
      } else {
        if (name !== prefix) fields.push({ name: part, code: String(code), offset })
        offset += bytesOf(String(code))
      }
    }
  }
  return { fields, itemBytes: offset }
}

const bytesOf = (code: string): number => {
  const [, letter, digits] = /^[<>|=]?([a-zA-Z?])(\d*)/.exec(code) ?? []
  if (letter === undefined) throw unknownType(code)
  return letter === 'U' ? 4 * Number(digits) : Number(digits || 1)
}

function typeOf(code: string): FieldType | null {
  const [, order, letter, digits] = /^([<>|=]?)([iufb?])(\d*)$/.exec(code) ?? []
  if (letter === undefined) return null
  const kind = letter === 'i' ? 'int' : letter === 'f' ? 'float' : 'uint'
  const type: FieldType = { kind, bytes: Number(digits || 1), littleEndian: order !== '>' }
  return type.bytes !== 3 && fieldGetter(type) ? type : null
}

const nameOf = ({ kind, bytes, littleEndian }: FieldType) => `${8 * bytes}-bit ${kind === 'float' ? 'float' : 'integer'}${littleEndian || bytes === 1 ? '' : ', big-endian'}`

function unknownType(code: string): RecordError {
  return new RecordError('npy-type', `The NPY type “${code}” is not a channel’s: integers of up to 8 bytes and floats of 2, 4 or 8 are read. Save the record as float32 (array.astype("f4")).`)
}
