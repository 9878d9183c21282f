import type { FileEnd, ReadAt } from './fileEnd'

interface Box {
  type: string
  at: number
  bodyAt: number
  end: number
}

/** A movie header of a fragmented file is small; a bigger one is not looked into. */
const maximumHeaderBytes = 1 << 20
const padding = new Set(['free', 'skip', 'wide'])

/**
 * The end of a MOV or MP4 (ISO/IEC 14496-12). In a fragmented one the number of frames is nowhere, but its index
 * (`mfra` at the end, `sidx` in front) or its stated length (`mehd`) may tell.
 */
export async function quickTimeEnd(read: ReadAt, size: number): Promise<FileEnd> {
  const boxes = await topBoxes(read, size)
  const last = boxes.findLast(({ type }) => !padding.has(type))
  if (!last) return { state: 'unknown' }
  if (!boxes.some(({ type }) => type === 'moof')) return last.end > size ? { state: 'cut', detail: behind(last, size) } : { state: 'whole' }
  const indexes = boxes.filter(({ type }) => type === 'sidx')
  const index = indexes.length === 1 ? await segmentIndex(read, indexes[0]) : null
  const stated = index ? { expectedSeconds: index.seconds } : await statedSeconds(read, boxes)
  if (last.end > size) return { state: 'cut', detail: behind(last, size), ...stated }
  if (last.type === 'moof') return { state: 'cut', detail: 'behind the header of a fragment', ...stated }
  if (last.type === 'mfra') return { state: 'whole' }
  if (index) return index.end > size ? { state: 'cut', detail: `${index.end - size} bytes before its index says`, ...stated } : { state: 'whole' }
  return { state: 'unknown', ...stated }
}

const behind = ({ type, end }: Box, size: number) => `${end - size} bytes before its last part (${type}) does`

async function topBoxes(read: ReadAt, size: number): Promise<Box[]> {
  const boxes: Box[] = []
  for (let at = 0; at + 8 <= size;) {
    const box = boxAt(await read(at, 16), 0, at, size)
    if (!box) break
    boxes.push(box)
    at = box.end
  }
  return boxes
}

function boxAt(bytes: Buffer, offset: number, at: number, fileSize: number): Box | null {
  if (offset + 8 > bytes.length) return null
  const short = bytes.readUInt32BE(offset)
  const type = bytes.toString('latin1', offset + 4, offset + 8)
  if (short === 0) return { type, at, bodyAt: at + 8, end: fileSize }
  if (short === 1 && offset + 16 > bytes.length) return null
  const length = short === 1 ? Number(bytes.readBigUInt64BE(offset + 8)) : short
  const header = short === 1 ? 16 : 8
  return length < header ? null : { type, at, bodyAt: at + header, end: at + length }
}

/** Length of all fragments by the movie's `mehd`, where there is one. */
async function statedSeconds(read: ReadAt, boxes: Box[]): Promise<{ expectedSeconds?: number }> {
  const movie = boxes.find(({ type }) => type === 'moov')
  if (!movie || movie.end - movie.bodyAt > maximumHeaderBytes) return {}
  const body = await read(movie.bodyAt, movie.end - movie.bodyAt)
  const header = within(body, 'mvhd')
  const stated = within(within(body, 'mvex') ?? Buffer.alloc(0), 'mehd')
  if (!header || !stated || header.length < 24 || stated.length < 8) return {}
  const timescale = header.readUInt32BE(header[0] === 1 ? 20 : 12)
  const duration = stated[0] === 1 && stated.length >= 12 ? Number(stated.readBigUInt64BE(4)) : stated.readUInt32BE(4)
  return timescale && duration ? { expectedSeconds: duration / timescale } : {}
}

/** Body of the first box of a type among siblings. */
function within(bytes: Buffer, type: string): Buffer | null {
  for (let at = 0; at < bytes.length;) {
    const box = boxAt(bytes, at, at, bytes.length)
    if (!box) return null
    if (box.type === type) return bytes.subarray(box.bodyAt, box.end)
    at = box.end
  }
  return null
}

/** What a segment index (ISO/IEC 14496-12 clause 8.16.3) refers to: where that ends, and how long it lasts. */
async function segmentIndex(read: ReadAt, { bodyAt, end }: Box): Promise<{ end: number, seconds: number } | null> {
  const body = await read(bodyAt, Math.min(end - bodyAt, maximumHeaderBytes))
  if (body.length < 24 || body.length < end - bodyAt) return null
  const wide = body[0] === 1
  const timescale = body.readUInt32BE(8)
  const firstOffset = wide ? Number(body.readBigUInt64BE(20)) : body.readUInt32BE(16)
  let at = wide ? 28 : 20
  const count = body.readUInt16BE(at + 2)
  at += 4
  // An index of one fragment stands in front of every fragment, and says nothing of the next.
  if (count < 2 || body.length < at + 12 * count) return null
  let bytes = 0
  let ticks = 0
  for (let i = 0; i < count; i++, at += 12) {
    bytes += body.readUInt32BE(at) & 0x7fffffff
    ticks += body.readUInt32BE(at + 4)
  }
  return { end: end + firstOffset + bytes, seconds: ticks / timescale }
}
