import { LineReader } from './lineReader'
import { latin1, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import { readUffHeader, type UffHeader } from './uffHeader'

/** A dataset 58 in a file: its header, and where its data lie. */
export interface UffDataset extends UffHeader {
  /** Where its header lines begin. */
  byte: number
  dataOffset: number
  /** Null for ASCII. */
  binary: { littleEndian: boolean, bytes: number } | null
}

export interface UffContents {
  datasets: UffDataset[]
  /** Numbers of the datasets that are no functions. */
  others: number[]
}

const headerLines = 11
const mostDatasets = 4096
const ieee = 2
const littleEndianOrder = 1
const delimiter = /^\s*-1\s*$/

/**
 * Find the datasets 58 of a universal file without reading their data.
 *
 * A data block in ASCII is stepped over by the length of its first line; where that does not lead to its end, line by line.
 *
 * @throws RecordError `uff-header`, `uff-float`, `uff-too-many`, `file-cut`
 */
export async function scanUff(source: RandomAccess): Promise<UffContents> {
  const reader = new LineReader(source)
  const contents: UffContents = { datasets: [], others: [] }
  let at = 0
  for (let line = await reader.at(at); line; line = await reader.at(at)) {
    at = line.next
    if (!delimiter.test(line.text)) continue
    const kind = await reader.at(at)
    if (!kind) break
    if (/^\s*58(?:b|\s|$)/i.test(kind.text)) {
      const dataset = await readDataset(reader, kind)
      contents.datasets.push(dataset)
      if (contents.datasets.length > mostDatasets) throw new RecordError('uff-too-many', `The universal file holds more than ${mostDatasets} functions. Export the channels’ time histories alone.`)
      at = dataset.binary ? await afterBinary(source, dataset) : await afterText(reader, dataset)
    } else {
      if (/^\s*\d+/.test(kind.text)) contents.others.push(Number.parseInt(kind.text, 10))
      at = await afterDelimiter(reader, kind.next)
    }
  }
  return contents
}

async function readDataset(reader: LineReader, kind: { text: string, next: number }): Promise<UffDataset> {
  const [tag, order, float, stated] = kind.text.trim().split(/\s+/)
  const isBinary = /b/i.test(tag) || order === 'b'
  const [, byteOrder, floatFormat, count, bytes] = /58\s*b\s*(\d+)\s+(\d+)\s+(\d+)\s+(\d+)/i.exec(kind.text) ?? [null, order, float, stated, '0']
  if (isBinary && Number(floatFormat) !== ieee) throw new RecordError('uff-float', `The binary dataset 58 at byte ${kind.next} holds floating-point numbers of format ${floatFormat}; only IEEE 754 (format 2) is read. Export the universal file again, in ASCII.`)
  const lines: string[] = []
  let at = kind.next
  for (let i = 0; i < (isBinary ? Number(count) || headerLines : headerLines); i++) {
    const line = await reader.at(at)
    if (!line) throw new RecordError('file-cut', `The universal file ends at byte ${at}, within the header of the dataset 58 at byte ${kind.next}. Copy the file again.`)
    lines.push(line.text)
    at = line.next
  }
  return { ...readUffHeader(lines, kind.next), byte: kind.next, dataOffset: at, binary: isBinary ? { littleEndian: Number(byteOrder) === littleEndianOrder, bytes: Number(bytes) } : null }
}

/** Values that stand in a line of ASCII data: 6E13.5, 4E20.12 or 2(E13.5,E20.12). */
export const valuesPerLine = ({ ordinateType }: UffHeader): number => ordinateType === 4 || ordinateType === 6 ? 4 : 6

/** Numbers in the data: two a pair, and two a complex value. */
export const valueCount = ({ count, isEven, ordinateType }: UffHeader): number => count * ((isEven ? 0 : 1) + (ordinateType >= 5 ? 2 : 1))

/** Bytes of a binary data block. */
export function binaryBytes(dataset: UffDataset): number {
  const single = dataset.ordinateType === 2 || dataset.ordinateType === 5
  const own = (single ? 4 : 8) * (dataset.ordinateType >= 5 ? 2 : 1)
  const least = dataset.count * (own + (dataset.isEven ? 0 : 4))
  return Math.max(dataset.binary!.bytes, least)
}

async function afterBinary(source: RandomAccess, dataset: UffDataset): Promise<number> {
  const end = dataset.dataOffset + binaryBytes(dataset)
  if (end > source.size) throw new RecordError('file-cut', `The universal file ends at byte ${source.size}, but the data of the dataset 58 at byte ${dataset.byte} reach to byte ${end}. Copy the file again.`)
  const [closing] = /^\s*-1[ \t]*(?:\r?\n|$)/.exec(latin1(await source.read(end, Math.min(100, source.size - end)))) ?? ['']
  return end + closing.length
}

async function afterText(reader: LineReader, dataset: UffDataset): Promise<number> {
  const lines = Math.ceil(valueCount(dataset) / valuesPerLine(dataset))
  const first = await reader.at(dataset.dataOffset)
  if (first && lines > 0) {
    const last = await reader.at(dataset.dataOffset + (lines - 1) * (first.next - dataset.dataOffset))
    const closing = last && await reader.at(last.next)
    if (closing && delimiter.test(closing.text)) return closing.next
  }
  return afterDelimiter(reader, dataset.dataOffset)
}

async function afterDelimiter(reader: LineReader, from: number): Promise<number> {
  let at = from
  for (let line = await reader.at(at); line; line = await reader.at(at)) {
    at = line.next
    if (delimiter.test(line.text)) return at
  }
  return at
}
