import type { Flag } from '../../shared/measurement'
import type { RecordFormat } from '../../shared/records'
import { readCsvHead } from './csvHead'
import { openRecord } from './openRecord'
import { chunksOf, type RandomAccess } from './randomAccess'
import { chooseColumns, guessColumns, type ColumnGuess } from './recordColumns'
import { describeCsv, firstCsvRows } from './recordCsv'
import { RecordError } from './recordError'
import { planRecord } from './recordSink'
import type { RecordColumn, RecordOptions } from './recordTable'
import { firstRows } from './readTable'
import { asUtf8 } from './utf16'

export interface RecordSniff {
  format: RecordFormat
  /** For people: "WAV, 24-bit integer". */
  description: string
  columns: (RecordColumn & { guess: ColumnGuess | null })[]
  /** From the header, or from the first rows of the time column; null when neither says. */
  sampleRateHz: number | null
  /** Samples of each column; an estimate from the file's size for text. */
  rows: number
  rowsAreExact: boolean
  /** The first values of every column, one array a column; null where there is no number. */
  preview: (number | null)[][]
  flags: Flag[]
  /** What stands in the way of reading it with the guesses alone (and what `options` say). */
  needs: { code: string, message: string } | null
}

interface Facts extends Pick<RecordSniff, 'format' | 'description' | 'rows' | 'rowsAreExact' | 'sampleRateHz' | 'flags'> {
  columns: RecordColumn[]
  first: Float64Array[]
  startSeconds: number
}

const defaultRows = 200

/**
 * What a record holds, from its beginning only: format, columns, guesses with reasons, sample rate, first rows.
 *
 * @param previewRows at most so many rows; text gives no more than lie in its first 64 KiB
 * @throws RecordError when the format is not known or its header is damaged
 */
export async function sniffRecord(source: RandomAccess, { filename, previewRows = defaultRows, ...options }: RecordOptions & { filename?: string, previewRows?: number } = {}): Promise<RecordSniff> {
  const { columns, first, startSeconds, ...facts } = await findFacts(source, filename, previewRows)
  const asked = options.columns ?? {}
  const guesses = guessColumns(columns, asked, new Set(), first)
  const sniff: RecordSniff = {
    ...facts, needs: null,
    columns: columns.map(column => ({ ...column, guess: guesses.get(column.index) ?? null })),
    preview: first.map(values => Array.from(values.subarray(0, previewRows), value => Number.isFinite(value) ? value : null)),
  }
  try {
    const chosen = chooseColumns(columns, asked, first)
    const fileRateHz = facts.format === 'csv' && chosen.columns.time !== undefined ? null : facts.sampleRateHz
    const plan = planRecord(columns, chosen, options, fileRateHz, startSeconds, facts.format === 'csv' ? 'Line' : 'Sample')
    const time = chosen.columns.time
    if (plan.times && time !== undefined) first[time].forEach((value, row) => plan.times!.add(value * plan.timeScale, row))
    if (!plan.times || (time !== undefined && first[time].length > 1)) sniff.sampleRateHz = plan.timeBase().sampleRateHz
  } catch (error) {
    if (!(error instanceof RecordError)) throw error
    sniff.needs = { code: error.code, message: error.message }
  }
  return sniff
}

async function findFacts(source: RandomAccess, filename: string | undefined, previewRows: number): Promise<Facts> {
  const table = await openRecord(source, filename)
  if (table === 'csv') return csvFacts(source, previewRows)
  try {
    const { format, description, columns, rows, sampleRateHz, startSeconds, flags } = table
    return { format, description, columns, rows, rowsAreExact: true, sampleRateHz, startSeconds, flags, first: await firstRows(table, previewRows) }
  } finally {
    table.close?.()
  }
}

async function csvFacts(source: RandomAccess, previewRows: number): Promise<Facts> {
  const head = await readCsvHead(asUtf8(chunksOf(source, 0, Math.min(source.size, 1 << 18))))
  const first = firstCsvRows(head, previewRows)
  const headerBytes = head.lines.slice(0, head.layout.headerLines).join('\n').length
  const dataLines = head.lines.slice(head.layout.headerLines).filter(line => line.trim())
  const rowBytes = (dataLines.join('\n').length + 1) / dataLines.length
  const isWhole = source.size <= head.bytes.length + 3
  return {
    format: 'csv', description: describeCsv(head), columns: head.columns, first, sampleRateHz: head.layout.sampleRateHz, startSeconds: 0, flags: [],
    rows: isWhole ? dataLines.length : Math.round((source.size - headerBytes) / rowBytes), rowsAreExact: isWhole,
  }
}
