import { openRecord } from './openRecord'
import { chunksOf, type RandomAccess } from './randomAccess'
import { readCsvRecord } from './recordCsv'
import type { RecordData, RecordOptions } from './recordTable'
import { readTable } from './readTable'

/**
 * Read the wanted channels of a DAQ record of any known format: CSV and TSV, WAV, NPY, universal file (dataset 58), HDF5.
 *
 * The format is recognised by the content; the file name only appears in messages. Columns that `columns` does not name
 * are guessed, see `guessColumns`. Values are float32 in the file's units, or in those that a sensitivity gives.
 * Memory: four bytes a sample and wanted channel and about a megabyte; text needs twice that for one channel at the end.
 *
 * @throws RecordError with a stable code and a sentence that names the line, byte or sample and says what to do
 */
export async function readRecord(source: RandomAccess, { filename, ...options }: RecordOptions & { filename?: string } = {}): Promise<RecordData> {
  const opened = await openRecord(source, filename)
  if (opened === 'csv') return readCsvRecord(chunksOf(source), options)
  try {
    return await readTable(opened, options)
  } finally {
    opened.close?.()
  }
}
