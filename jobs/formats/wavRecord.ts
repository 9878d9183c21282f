import type { Flag } from '../../shared/measurement'
import { columnBlocks, type ColumnPlace, type FieldType } from './fields'
import { latin1, readExactly, viewOf, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import type { RecordTable } from './recordTable'

interface WavFormat {
  channels: number
  sampleRateHz: number
  frameBytes: number
  type: FieldType
  text: string
}

interface Data {
  offset: number
  bytes: number
  flags: Flag[]
}

const largestSize = 0xffffffff
const maxChunks = 10_000
const integerTag = 1
const floatTag = 3
const extensibleTag = 0xfffe

/** Whether a file's first 12 bytes are those of a WAV: RIFF, its 64-bit forms RF64 and BW64, or big-endian RIFX. */
export const isWav = (head: Uint8Array): boolean => /^(?:RIFF|RF64|BW64|RIFX)[^]{4}WAVE$/.test(latin1(head.subarray(0, 12)))

/**
 * Open a WAV file: any number of channels, 8 to 32-bit integers, 32 and 64-bit floats, WAVE_FORMAT_EXTENSIBLE, more than
 * 4 GB as RF64 (EBU Tech 3306) or BW64 (ITU-R BS.2088).
 *
 * Integers are divided by their full scale, so values lie in [−1, 1); floats stay as they are. Units are not known.
 * A data length of zero, all ones or beyond the end, as an interrupted recorder leaves it, is taken as "to the end" and
 * flagged `wav-length`.
 *
 * @throws RecordError `wav-damaged`, `wav-encoding`, `file-cut`
 */
export async function openWav(source: RandomAccess): Promise<RecordTable> {
  const { format, data } = await readChunks(source)
  const rows = Math.floor(data.bytes / format.frameBytes)
  const flags = [...data.flags]
  if (data.bytes % format.frameBytes) flags.push({ code: 'last-sample-cut', severity: 'warning', message: `The last sample, at byte ${data.offset + rows * format.frameBytes}, is cut off and was left out. Check that the recorder finished the file.` })
  const sampleBytes = format.frameBytes / format.channels
  const place = (channel: number): ColumnPlace => ({ offset: data.offset + channel * sampleBytes, strideBytes: format.frameBytes, type: format.type, ...scaleOf(format.type) })
  return {
    format: 'wav', description: `WAV, ${format.text}`, rows, sampleRateHz: format.sampleRateHz, startSeconds: 0, flags,
    columns: Array.from({ length: format.channels }, (_, index) => ({ index, name: `channel ${index + 1}`, header: '', unit: null })),
    blocks: (wanted, from, to) => columnBlocks(source, wanted.map(place), from, to),
  }
}

function scaleOf({ kind, bytes }: FieldType): { scale: number, zero: number } {
  if (kind === 'float') return { scale: 1, zero: 0 }
  return { scale: 2 ** (1 - 8 * bytes), zero: kind === 'uint' ? 128 : 0 }
}

async function readChunks(source: RandomAccess): Promise<{ format: WavFormat, data: Data }> {
  const littleEndian = latin1(await readExactly(source, 0, 4, 'the WAV header')) !== 'RIFX'
  let format: WavFormat | null = null
  let longData: number | null = null
  let at = 12
  for (let i = 0; i < maxChunks && at + 8 <= source.size; i++) {
    const head = (await readExactly(source, at, 8, 'a chunk header')).slice()
    const id = latin1(head.subarray(0, 4))
    const size = viewOf(head).getUint32(4, littleEndian)
    if (id === 'ds64') longData = Number(viewOf(await readExactly(source, at + 8, 24, 'the 64-bit sizes')).getBigUint64(8, true))
    if (id === 'fmt ') format = readFormat((await readExactly(source, at + 8, Math.min(size, 64), 'the format chunk')).slice(), littleEndian)
    if (id === 'data') {
      if (!format) throw new RecordError('wav-damaged', `The WAV’s samples begin at byte ${at + 8}, but no format was said before. Copy the file again from the recorder.`)
      return { format, data: await dataOf(source, at + 8, size === largestSize && longData !== null ? longData : size) }
    }
    if (!/^[\x20-\x7e]{4}$/.test(id)) throw new RecordError('wav-damaged', `At byte ${at} of the WAV a chunk’s name was expected, but something else stands there. Copy the file again from the recorder.`)
    at += 8 + size + size % 2
  }
  throw new RecordError('wav-damaged', `The WAV ends at byte ${source.size} without samples (no data chunk). Copy the file again from the recorder.`)
}

/** A length that cannot be is taken as the rest of the file. */
async function dataOf(source: RandomAccess, offset: number, stated: number): Promise<Data> {
  const rest = source.size - offset
  if (stated <= rest && stated > 0 && (stated === rest || await isChunkOrPad(source, offset + stated + stated % 2))) return { offset, bytes: stated, flags: [] }
  const said = stated === largestSize ? 'nothing' : `${stated} bytes`
  return { offset, bytes: rest, flags: [{ code: 'wav-length', severity: 'warning', message: `The WAV’s header says ${said} of samples, but ${rest} bytes follow; all of them were read. The recorder was probably interrupted: check the record’s end.` }] }
}

/** After the samples comes another chunk, or nothing. */
async function isChunkOrPad(source: RandomAccess, at: number): Promise<boolean> {
  if (at + 8 > source.size) return true
  return /^[\x20-\x7e]{4}$/.test(latin1(await source.read(at, 4)))
}

/** Samples lie left-justified in whole bytes, so a container's full scale is the sample's. */
function readFormat(bytes: Uint8Array, littleEndian: boolean): WavFormat {
  if (bytes.length < 16) throw new RecordError('wav-damaged', `The WAV’s format chunk holds ${bytes.length} bytes; at least 16 were expected. Copy the file again from the recorder.`)
  const view = viewOf(bytes)
  const outer = view.getUint16(0, littleEndian)
  const tag = outer === extensibleTag && bytes.length >= 26 ? view.getUint16(24, littleEndian) : outer
  const channels = view.getUint16(2, littleEndian)
  const sampleRateHz = view.getUint32(4, littleEndian)
  const frameBytes = view.getUint16(12, littleEndian)
  const sampleBytes = frameBytes / channels
  const kind = tag === floatTag ? 'float' : sampleBytes === 1 ? 'uint' : 'int'
  const isKnown = tag === floatTag ? sampleBytes === 4 || sampleBytes === 8 : tag === integerTag && [1, 2, 3, 4].includes(sampleBytes)
  if (!isKnown) throw new RecordError('wav-encoding', `The WAV’s samples are encoded as format ${tag} with ${view.getUint16(14, littleEndian)} bits, which is not read. Export the record as PCM of 16, 24 or 32 bits, or as 32-bit float.`)
  if (!channels || !sampleRateHz) throw new RecordError('wav-damaged', `The WAV’s header says ${channels} channels at ${sampleRateHz} Hz. Copy the file again from the recorder.`)
  return { channels, sampleRateHz, frameBytes, type: { kind, bytes: sampleBytes, littleEndian }, text: `${8 * sampleBytes}-bit ${kind === 'float' ? 'float' : 'integer'}` }
}
