import { isHdf5, openHdf5 } from './hdf5Record'
import { isNpy, openNpy } from './npyRecord'
import { latin1, type RandomAccess } from './randomAccess'
import { RecordError } from './recordError'
import type { RecordTable } from './recordTable'
import { isUff, openUff58 } from './uff58Record'
import { findUtf16 } from './utf16'
import { isWav, openWav } from './wavRecord'

const headBytes = 4096

/** Beginnings of files that are sometimes taken for records, and what to do instead. */
const strangers: [string[], string][] = [
  [['PK\x03\x04'], 'a ZIP archive or a spreadsheet. Unpack it, or save the sheet as CSV'],
  [['\x1f\x8b', 'BZh', '\xfd7zXZ', '7z\xbc\xaf'], 'compressed. Unpack it'],
  [['\xd0\xcf\x11\xe0'], 'an old spreadsheet. Save the sheet as CSV'],
  [['\x1aE\xdf\xa3', '\x00\x00\x00\x14ftyp', '\x00\x00\x00\x18ftyp', '\x00\x00\x00\x1cftyp', '\x00\x00\x00\x20ftyp'], 'a video. Upload it as a clip'],
  [['fLaC', 'OggS', 'ID3', '\xff\xfb'], 'compressed sound. Save it as WAV'],
  [['%PDF', '\x89PNG', '\xff\xd8\xff'], 'a document or picture. Export the record itself'],
]

/**
 * Recognise a record's format by its content and open it.
 *
 * @returns the opened record, or `csv` for text, which is read in one pass and has no known length
 * @throws RecordError `empty`, `unknown-format`, and what the format's own reader throws
 */
export async function openRecord(source: RandomAccess, filename = ''): Promise<RecordTable | 'csv'> {
  const head = (await source.read(0, Math.min(headBytes, source.size))).slice()
  if (head.length === 0) throw new RecordError('empty', 'The record is empty. Upload the file again from the DAQ PC.')
  if (isWav(head)) return openWav(source)
  if (isNpy(head)) return openNpy(source)
  if (await isHdf5(source, head)) return openHdf5(source)
  if (isUff(head)) return openUff58(source)
  const text = latin1(head.subarray(0, 16))
  const stranger = strangers.find(([beginnings]) => beginnings.some(beginning => text.startsWith(beginning)))
  if (stranger) throw new RecordError('unknown-format', `${nameOf(filename)} is ${stranger[1]}, then upload that.`)
  const zero = head.indexOf(0)
  if (zero >= 0 && !findUtf16(head)) throw new RecordError('unknown-format', `${nameOf(filename)} is of a binary format that is not known (byte ${zero} is zero; it begins with “${text.replace(/[^\x20-\x7e]/g, '·')}”). Export the record as CSV, WAV, NPY, HDF5 or a universal file (dataset 58).`)
  return 'csv'
}

const nameOf = (filename: string) => filename ? `The file “${filename}”` : 'The file'
