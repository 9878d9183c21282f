import type { Flag } from '../../shared/measurement'
import type { RecordFormat } from '../../shared/records'
import { readCsvHead } from './csvHead'
import { openRecord } from './openRecord'
import { chunksOf, memorySource, type RandomAccess } from './randomAccess'
import { chooseColumns, guessColumns, type ChosenColumns, type ColumnGuess } from './recordColumns'
import { chooseCsvColumns, describeCsv, firstCsvRows } from './recordCsv'
import { RecordError } from './recordError'
import { planRecord } from './recordSink'
import type { RecordColumn, RecordOptions, RecordSeries } from './recordTable'
import { commonSeries, firstRows } from './readTable'
import { asUtf8, findUtf16 } from './utf16'

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
  /** Length, rate and start of the chosen columns together. */
  series: (chosen: ChosenColumns['columns']) => RecordSeries
  choose: (options: RecordOptions) => ChosenColumns
}

const defaultRows = 200
const sniffedBytes = 1 << 18

/**
 * What a record holds, from its beginning only: format, columns, guesses with reasons, sample rate, first rows.
 *
 * @param previewRows at most so many rows; text gives no more than lie in its first 64 KiB
 * @throws RecordError when the format is not known or its header is damaged
 */
export async function sniffRecord(source: RandomAccess, { filename, previewRows = defaultRows, ...options }: RecordOptions & { filename?: string, previewRows?: number } = {}): Promise<RecordSniff> {
  const facts = await findFacts(source, filename, previewRows)
  const { format, description, columns, first, rows, rowsAreExact, sampleRateHz, flags } = facts
  const guesses = guessColumns(columns, options.columns ?? {}, new Set(), first)
  return {
    format, description, rows, rowsAreExact, sampleRateHz, flags, needs: null, ...judge(facts, options),
    columns: columns.map(column => ({ ...column, guess: guesses.get(column.index) ?? null })),
    preview: first.map(values => Array.from(values.subarray(0, previewRows), value => Number.isFinite(value) ? value : null)),
  }
}

/** Length and rate with the guesses, or what stands in their way. */
function judge({ format, columns, first, series, choose }: Facts, options: RecordOptions): Partial<RecordSniff> {
  try {
    const chosen = choose(options)
    const common = series(chosen.columns)
    // In text a time column goes before what the preamble says.
    const fileRateHz = format === 'csv' && chosen.columns.time !== undefined ? null : common.sampleRateHz
    const plan = planRecord(columns, chosen, options, fileRateHz, common.startSeconds, format === 'csv' ? 'Line' : 'Sample')
    const { times, timeScale } = plan
    if (times) first[chosen.columns.time!].forEach((value, row) => times.add(value * timeScale, row))
    return { rows: common.rows, sampleRateHz: plan.timeBase().sampleRateHz }
  } catch (error) {
    if (!(error instanceof RecordError)) throw error
    return { needs: { code: error.code, message: error.message } }
  }
}

async function findFacts(source: RandomAccess, filename: string | undefined, previewRows: number): Promise<Facts> {
  const table = await openRecord(source, filename)
  if (table === 'csv') return csvFacts(source, previewRows)
  try {
    const { format, description, columns, rows, sampleRateHz, flags } = table
    const first = await firstRows(table, previewRows)
    return {
      format, description, columns, rows, rowsAreExact: true, sampleRateHz, flags, first,
      series: chosen => commonSeries(table, chosen), choose: options => chooseColumns(columns, options.columns ?? {}, first),
    }
  } finally {
    table.close?.()
  }
}

async function csvFacts(source: RandomAccess, previewRows: number): Promise<Facts> {
  const chunk = (await source.read(0, Math.min(source.size, sniffedBytes))).slice()
  const bytesPerCharacter = findUtf16(chunk) ? 2 : 1
  const head = await readCsvHead(asUtf8(chunksOf(memorySource(chunk))))
  const { layout: { headerLines, sampleRateHz }, lines, lineBytes } = head
  const dataLines = lines.slice(headerLines).filter(line => line.trim())
  const characters = (texts: string[]) => texts.reduce((sum, line) => sum + line.length + 1, 0)
  const rowBytes = lineBytes * characters(dataLines) / characters(lines) / dataLines.length
  const isWhole = head.isWhole && chunk.length === source.size
  const rows = dataLines.length + (isWhole ? 0 : Math.round((source.size / bytesPerCharacter - lineBytes) / rowBytes))
  const first = firstCsvRows(head, previewRows)
  return {
    format: 'csv', description: describeCsv(head), columns: head.columns, first, sampleRateHz, flags: [], rows, rowsAreExact: isWhole,
    series: () => ({ rows, sampleRateHz, startSeconds: 0 }), choose: options => chooseCsvColumns(head, options, first),
  }
}
