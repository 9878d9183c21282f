import type { RandomAccess } from './randomAccess'
import { readExactly, viewOf } from './randomAccess'

/** How one number lies in bytes. `float` of 2 bytes is IEEE half precision; `int` of 3 bytes is a WAV's 24-bit sample. */
export interface FieldType {
  kind: 'int' | 'uint' | 'float'
  bytes: number
  littleEndian: boolean
}

/** A column of a binary table: the first value's place in the file and how far it is to the next. */
export interface ColumnPlace {
  offset: number
  strideBytes: number
  type: FieldType
  /** value = scale · (number − zero) */
  scale?: number
  zero?: number
}

type Getter = (view: DataView, at: number) => number

/** Null for a type that is not known. */
export function fieldGetter({ kind, bytes, littleEndian: le }: FieldType): Getter | null {
  switch (`${kind}${bytes}`) {
    case 'int1': return (view, at) => view.getInt8(at)
    case 'int2': return (view, at) => view.getInt16(at, le)
    case 'int3': return le
      ? (view, at) => view.getUint16(at, true) | view.getInt8(at + 2) << 16
      : (view, at) => view.getInt8(at) << 16 | view.getUint16(at + 1)
    case 'int4': return (view, at) => view.getInt32(at, le)
    case 'int8': return (view, at) => Number(view.getBigInt64(at, le))
    case 'uint1': return (view, at) => view.getUint8(at)
    case 'uint2': return (view, at) => view.getUint16(at, le)
    case 'uint4': return (view, at) => view.getUint32(at, le)
    case 'uint8': return (view, at) => Number(view.getBigUint64(at, le))
    case 'float2': return (view, at) => halfFloat(view.getUint16(at, le))
    case 'float4': return (view, at) => view.getFloat32(at, le)
    case 'float8': return (view, at) => view.getFloat64(at, le)
    default: return null
  }
}

/** IEEE 754 binary16. */
function halfFloat(bits: number): number {
  const sign = bits & 0x8000 ? -1 : 1
  const exponent = bits >> 10 & 0x1f
  const fraction = bits & 0x3ff
  if (exponent === 0) return sign * fraction * 2 ** -24
  if (exponent === 0x1f) return fraction ? Number.NaN : sign * Infinity
  return sign * (1024 + fraction) * 2 ** (exponent - 25)
}

const blockBytes = 1 << 20

/**
 * Values of columns for rows `from` to before `to`, about 1 MiB of the file at a time. Columns that share rows are read
 * together; columns that lie one after another are read each by itself, so what is not wanted is not read.
 */
export async function* columnBlocks(source: RandomAccess, places: readonly ColumnPlace[], from: number, to: number): AsyncGenerator<Float64Array[]> {
  const stride = Math.max(...places.map(({ strideBytes }) => strideBytes))
  const blockRows = Math.max(1, Math.floor(blockBytes / stride))
  const columns = places.map(() => new Float64Array(Math.min(blockRows, to - from)))
  const groups = groupByRow(places)
  for (let row = from; row < to; row += blockRows) {
    const count = Math.min(blockRows, to - row)
    for (const { first, end, members } of groups) {
      const bytes = await readExactly(source, first + row * members[0].place.strideBytes, (count - 1) * members[0].place.strideBytes + end - first, 'a block of samples')
      for (const { place, column } of members) decode(viewOf(bytes), place.offset - first, place, columns[column].subarray(0, count))
    }
    yield columns.map(column => column.subarray(0, count))
  }
}

interface RowGroup {
  first: number
  end: number
  members: { place: ColumnPlace, column: number }[]
}

/** Columns whose first values lie within one stride of each other are of one row. */
function groupByRow(places: readonly ColumnPlace[]): RowGroup[] {
  const groups: RowGroup[] = []
  const sorted = places.map((place, column) => ({ place, column })).sort((a, b) => a.place.offset - b.place.offset)
  for (const member of sorted) {
    const { offset, strideBytes, type } = member.place
    const group = groups.at(-1)
    if (group && group.members[0].place.strideBytes === strideBytes && offset + type.bytes - group.first <= strideBytes) {
      group.end = Math.max(group.end, offset + type.bytes)
      group.members.push(member)
    } else groups.push({ first: offset, end: offset + type.bytes, members: [member] })
  }
  return groups
}

function decode(view: DataView, start: number, { type, strideBytes, scale = 1, zero = 0 }: ColumnPlace, out: Float64Array): void {
  const get = fieldGetter(type)!
  for (let i = 0, at = start; i < out.length; i++, at += strideBytes) out[i] = scale * (get(view, at) - zero)
}
