import { describe, expect, it } from 'vitest'
import { scanNumber } from '../../../jobs/formats/numberScan'
import { QuickRow } from '../../../jobs/formats/quickRow'
import { readCsvRecord } from '../../../jobs/formats/recordCsv'
import type { RecordOptions } from '../../../jobs/formats/recordTable'

async function* pieces(text: string | Uint8Array, size = 1 << 20) {
  const bytes = typeof text === 'string' ? new TextEncoder().encode(text) : text
  for (let at = 0; at < bytes.length; at += size) yield bytes.subarray(at, at + size)
}
const read = (text: string | Uint8Array, options?: RecordOptions, size?: number) => readCsvRecord(pieces(text, size), options)
const values = ({ channels }: Awaited<ReturnType<typeof read>>) => Object.fromEntries(channels.map(({ role, data }) => [role, [...data]]))
const codes = ({ flags }: { flags: { code: string }[] }) => flags.map(({ code }) => code)
const error = (code: string, message: RegExp) => expect.objectContaining({ name: 'RecordError', code, message: expect.stringMatching(message) })

/** Rows in the given dialect: time, lamp, force. */
function table({ delimiter, decimal = '.', header = ['Time [s]', 'Lamp [V]', 'Force [N]'], preamble = '', end = '\n', rows = 200, rateHz = 1000 }: { delimiter: string, decimal?: string, header?: string[], preamble?: string, end?: string, rows?: number, rateHz?: number }) {
  const number = (value: number, digits: number) => value.toFixed(digits).replace('.', decimal)
  const lines = Array.from({ length: rows }, (_, i) => [number(2 + i / rateHz, 6), number(1 + Math.sin(i), 4), number(-i / 8, 3)].join(delimiter))
  return preamble + [...header.length ? [header.join(delimiter)] : [], ...lines].join(end) + end
}

describe('CSV record', () => {
  it.each([
    ['comma', { delimiter: ',' }],
    ['semicolon with decimal comma', { delimiter: ';', decimal: ',' }],
    ['semicolon with decimal point', { delimiter: ';' }],
    ['tab', { delimiter: '\t' }],
    ['tab with decimal comma', { delimiter: '\t', decimal: ',' }],
    ['Windows line ends', { delimiter: ',', end: '\r\n' }],
    ['a preamble', { delimiter: ';', decimal: ',', preamble: '\uFEFFLogger;Unit 7\nChannels;3\n\nScale;1,0\n' }],
    ['a header in quotes', { delimiter: ',', header: ['"Time [s]"', '"Lamp, main [V]"', '"Force [N]"'] }],
    ['blanks around the delimiter', { delimiter: ' , ' }],
    ['a delimiter at the end of rows', { delimiter: ';', end: ';\n' }],
  ])('is read with %s', async (_, dialect) => {
    const record = await read(table(dialect))
    expect(record).toMatchObject({ sampleRateHz: 1000, startSeconds: 2, rows: 200 })
    expect(record.channels.map(({ role, unit }) => [role, unit])).toEqual([['illumination', 'V'], ['force', 'N']])
    const { illumination, force } = values(record)
    expect(illumination[7]).toBe(Math.fround(Number((1 + Math.sin(7)).toFixed(4))))
    expect(force[199]).toBe(-24.875)
    expect(force.length).toBe(200)
  })

  it.each([1, 7, 64, 1000])('is the same in pieces of %i bytes', async (size) => {
    const text = table({ delimiter: ';', decimal: ',', preamble: 'Shot on the bench\n', end: '\r\n' })
    expect(await read(text, {}, size)).toEqual(await read(text))
  })

  it('takes a row of units under the header', async () => {
    const record = await read('t\tPhotodiode\tAccel\ns\tmV\tm/s²\n0\t1\t2\n0.1\t3\t4\n')
    expect(record.channels.map(({ name, role, unit }) => ({ name, role, unit }))).toEqual([{ name: 'Photodiode', role: 'illumination', unit: 'mV' }, { name: 'Accel', role: 'acceleration', unit: 'm/s²' }])
    expect(record.sampleRateHz).toBe(10)
  })

  it('understands time in milliseconds', async () => {
    expect(await read('Zeit [ms];Licht\n5;1\n7;2\n9;3\n')).toMatchObject({ sampleRateHz: 500, startSeconds: 0.005 })
  })

  it('takes columns by name, with or without unit, in any case, and by index', async () => {
    const text = 'a;B [V];c\n0;10;20\n1;11;21\n'
    expect(values(await read(text, { columns: { time: 'A', illumination: 'b' } }))).toEqual({ illumination: [10, 11] })
    expect(values(await read(text, { columns: { illumination: 'B [V]', force: 2 }, sampleRateHz: 5 }))).toEqual({ illumination: [10, 11], force: [20, 21] })
    expect(values(await read('1;2\n3;4\n', { columns: { illumination: 1 }, sampleRateHz: 5 }))).toEqual({ illumination: [2, 4] })
  })

  it('takes a single column with decimal commas', async () => {
    expect(values(await read('lamp\n1,5\n2,5\n', { sampleRateHz: 10 }))).toEqual({ illumination: [1.5, 2.5] })
  })

  it('lets units that were given go before those in the file', async () => {
    expect((await read('t,light [V]\n0,1\n1,2\n', { units: { illumination: 'lx' } })).channels[0].unit).toBe('lx')
  })

  it('lets a sample rate that was given go before the time column, and says when they differ', async () => {
    const text = 't,light\n0,1\n1,2\n2,3\n'
    expect(codes(await read(text, { sampleRateHz: 1 }))).not.toContain('sample-rate-differs')
    const record = await read(text, { sampleRateHz: 2 })
    expect(record.sampleRateHz).toBe(2)
    expect(codes(record)).toContain('sample-rate-differs')
  })

  it('ignores text and gaps in columns that are not used', async () => {
    expect(values(await read('t,light,note\n0,1,2\n1,2,3\n2,3,warm\n3,4,\n'))).toEqual({ illumination: [1, 2, 3, 4] })
  })

  it('leaves a last line out that is cut off, and says so', async () => {
    const record = await read('t;light;force\n0;1;2\n1;2;3\n2;3')
    expect(record.rows).toBe(2)
    expect(record.flags.find(({ code }) => code === 'last-line-cut')?.message).toMatch(/last line, 4,/)
  })

  it('takes the first of several accelerometers, and names the others', async () => {
    const record = await read('t,light,acc tip,acc root\n0,1,2,3\n1,1,2,3\n')
    expect(values(record).acceleration).toEqual([2, 2])
    expect(record.flags.find(({ code }) => code === 'other-columns')?.message).toMatch(/“acc tip”.*“acc root”/)
  })

  it('keeps the rate of a long record whose time is printed with few digits', async () => {
    const record = await read(table({ delimiter: ',', rows: 30_000, rateHz: 51_200 }))
    expect(record.sampleRateHz / 51_200).toBeCloseTo(1, 6)
    expect(record.rows).toBe(30_000)
  })

  it.each(['utf16le', 'utf16be'])('is read as %s, with byte order mark or without, in odd pieces', async (encoding) => {
    const text = table({ delimiter: '\t', decimal: ',', end: '\r\n' })
    const encode = (content: string) => encoding === 'utf16le' ? Buffer.from(content, 'utf16le') : Buffer.from(content, 'utf16le').swap16()
    const expected = await read(text)
    expect(await read(Uint8Array.from(encode(`\uFEFF${text}`)), {}, 997)).toEqual(expected)
    expect(await read(Uint8Array.from(encode(text)), {}, 997)).toEqual(expected)
  })

  it.each([
    ['bars', '|', '|', '.'], ['blanks', ' ', ' ', '.'], ['runs of blanks and tabs', '  \t', ' \t  ', ','], ['blanks before and after', ' ', '   ', '.'],
  ])('is read with %s', async (_, inHeader, delimiter, decimal) => {
    const rows = Array.from({ length: 30 }, (_value, i) => `${' '.repeat(delimiter.length === 3 ? 2 : 0)}${[(i / 50).toFixed(2), `-${i}.5`, `1e-${i % 9}`].join(delimiter).replaceAll('.', decimal)}`)
    const record = await read(`${['t[s]', 'lamp[V]', 'force[N]'].join(inHeader)}\n${rows.join('\n')}\n`)
    expect(record).toMatchObject({ sampleRateHz: 50, rows: 30 })
    expect(record.channels.map(({ name, unit, data }) => [name, unit, data[17]])).toEqual([['lamp', 'V', -17.5], ['force', 'N', Math.fround(1e-8)]])
  })

  it('takes a header that is split otherwise than the rows', async () => {
    expect(values(await read('t,light,force\n0;1;2\n1;2;3\n'))).toEqual({ illumination: [1, 2], force: [2, 3] })
    expect(values(await read('Time [s]\tMain lamp [V]  \tForce [N]\n0 1 2\n1 2 3\n'))).toEqual({ illumination: [1, 2], force: [2, 3] })
  })

  it('takes the sample rate that the preamble states, unless there is a time column', async () => {
    for (const line of ['Sample rate: 51200 Hz', 'Sampling frequency;51,2 kHz', 'sample_rate\t51200', 'Abtastrate = 51200']) {
      expect((await read(`${line}\nlamp;force\n1;2\n2;3\n`)).sampleRateHz).toBe(51200)
      expect((await read(`${line}\nt;lamp\n1;2\n2;3\n`)).sampleRateHz).toBe(1)
    }
  })

  it.each(['10:00:0#.250', '2024-05-01T10:00:0#Z', '01.05.2024 10:00:0#', '5/1/2024 10:00:0# PM'])('passes over a column of clock times like %s when the rate is given', async (time) => {
    const record = await read(`time;light\n${Array.from({ length: 9 }, (_, i) => `${time.replace('#', String(i))};${i}`).join('\n')}\n`, { sampleRateHz: 1 })
    expect(values(record).illumination).toEqual([0, 1, 2, 3, 4, 5, 6, 7, 8])
    expect(codes(record)).toContain('clock-times')
  })

  it('leaves a footer out, and says so', async () => {
    const record = await read('t;light\n0;1\n1;2\n2;3\n\nEnd of record\nSamples;3\n')
    expect(values(record).illumination).toEqual([1, 2, 3])
    expect(record.flags.find(({ code }) => code === 'footer')?.message).toMatch(/Lines 6 to 7 at the end, “End of record”/)
  })

  it('begins with numbers though a byte order mark stands before them', async () => {
    expect(values(await read('\uFEFF1;2\n3;4\n', { columns: { illumination: 0 }, sampleRateHz: 5 }))).toEqual({ illumination: [1, 3] })
  })

  it('passes over empty columns at the end', async () => {
    const record = await read('t;light;note\n0;1;\n1;2;\n2;3;\n')
    expect(record.columns.map(({ name }) => name)).toEqual(['t', 'light', 'note'])
    expect(record.rows).toBe(3)
  })

  it('reads Latin-1 units without harm to the numbers', async () => {
    expect(values(await read(Uint8Array.from(Buffer.from('t;light;acc [m/s\xb2]\n0;1;2\n1;2;3\n', 'latin1'))))).toEqual({ illumination: [1, 2], acceleration: [2, 3] })
  })
})

describe('a CSV record is refused', () => {
  it.each([
    ['that is empty', '', {}, 'empty', /Upload the file again/],
    ['that is prose', 'Measured on Tuesday.\nIt rained.\n', {}, 'no-data', /first line reads “Measured on Tuesday\.”/],
    ['with clock times', 'time;light\n10:00:01;1\n10:00:02;2\n', {}, 'clock-times', /Line 2, column “time” holds a clock time, “10:00:01”.*sample rate in Hz/],
    ['with one row', 't,light\n0,1\n', {}, 'too-short', /one row/],
    ['without an illumination column', 't,force\n0,1\n1,2\n', {}, 'no-illumination', /Its columns are “t”, “force”/],
    ['without header and mapping', '0;1\n1;2\n', {}, 'no-illumination', /2 columns have no header/],
    ['with two lamps', 't,lamp A,lamp B\n0,1,2\n1,2,3\n', {}, 'ambiguous-columns', /“lamp A”, “lamp B”/],
    ['that lacks a named column', 't,light\n0,1\n1,2\n', { columns: { force: 'Shaker' } }, 'unknown-column', /“Shaker”.*“t”, “light”/],
    ['that lacks an indexed column', 't,light\n0,1\n1,2\n', { columns: { illumination: 2 } }, 'unknown-column', /number 2/],
    ['with an overload', 't;light\n0;1\n1;OVL\n2;3\n', {}, 'overload', /Line 3, column “light”: “OVL” says that the input was overloaded/],
    ['with an overload at its end', 't;light\n0;1\n1;2\n2;-Inf\n', {}, 'overload', /Line 4/],
    ['with an instrument’s overload number', 't;light\n0;1\n1;9.9E37\n2;3\n', {}, 'overload', /Line 3/],
    ['with an instrument’s number for none', 't;light\n0;1\n1;9.91E37\n2;3\n', {}, 'not-a-number', /Line 3/],
    ['with NaN', 't;light\n0;1\n1;NaN\n2;3\n', {}, 'not-a-number', /Line 3, column “light”.*“NaN”/],
    ['with a row split otherwise', 't;light;force\n0;1;2\n1;2;3\n2,3,4\n3;4;5\n', {}, 'column-missing', /Line 4 is split by commas, but the rows before it by semicolons/],
    ['whose commas mean two things', 't,light\n0,0,1,5\n0,1,2,5\n', {}, 'ambiguous-delimiter', /Line 2 has 4 cells under a header of 2/],
    ['with much text after the numbers', `t;light\n0;1\n1;2\n${'and so on\n'.repeat(30)}`, {}, 'not-a-number', /Line 4/],
    ['without time and rate', 'light,force\n0,1\n1,2\n', {}, 'no-time', /sample rate in Hz/],
    ['with a word among the numbers', 't,light\n0,1\n1,2\n2,oops\n3,4\n', {}, 'not-a-number', /Line 4, column “light”.*“oops”/],
    ['with an empty cell', 't;light\n0;1\n1;\n2;3\n', {}, 'not-a-number', /Line 3, column “light”.*nothing stands there/],
    ['with a short row', 't;light;force\n0;1;2\n1;2;3\n2;1\n3;4;5\n', {}, 'column-missing', /Line 4 ends before column “force”/],
    ['whose time stands still', 't,light\n0,1\n1,2\n1,3\n2,4\n', {}, 'time-not-uniform', /Line 4: the time 1 does not lie after/],
    ['with a gap in time', `t,light\n${Array.from({ length: 5000 }, (_, i) => `${(i < 3000 ? i : i + 40) / 1000},1`).join('\n')}\n`, {}, 'time-not-uniform', /at line 3002 the time steps by 41\.0 ms instead of 1\.00 ms/],
    ['whose clock runs unevenly', `t,light\n${Array.from({ length: 4000 }, (_, i) => `${i / 1000 + 2e-3 * Math.sin(i / 500)},1`).join('\n')}\n`, {}, 'time-not-uniform', /line \d+ is [\d.]+ ms (early|late)/],
  ] as [string, string | Uint8Array, RecordOptions, string, RegExp][])('%s', async (_, text, options, code, message) => {
    await expect(read(text, options)).rejects.toThrow(error(code, message))
  })
})

describe('number scanner', () => {
  it.each([['-12.5;', -12.5], ['7,25;', 7.25], ['.5;', 0.5], ['1.;', 1], ['123456789012345;', 123456789012345], ['-0;', -0], ['3;rest of it', 3], ['4\r', 4]] as const)('reads the plain row “%s” in one pass', (text, value) => {
    const values = new Float64Array(1)
    const bytes = new TextEncoder().encode(`${text}\n1`)
    expect(new QuickRow(0x3b, [0], values).read(bytes, 0)).toBe(text.length + 1)
    expect(values[0]).toBe(value)
  })

  it.each(['', '-', '.', '-,', ' 1', '1 ', '1e5', '1.2.3', 'abc', '1234567890123456', '+1', '"1"'])('leaves “%s” to the thorough way', (text) => {
    expect(new QuickRow(0x3b, [0], new Float64Array(1)).read(new TextEncoder().encode(`${text}\n`), 0)).toBe(0)
  })

  it('reads many numbers alike in both ways', () => {
    const values = new Float64Array(1)
    const quick = new QuickRow(0x3b, [0], values)
    let state = 1
    let plain = 0
    for (let i = 0; i < 200_000; i++) {
      state = state * 48271 % 2147483647
      const text = ((state - 1e9) / 10 ** (i % 12)).toFixed(i % 9)
      const bytes = new TextEncoder().encode(`${text}\n`)
      if (quick.read(bytes, 0) && ++plain && values[0] !== Number(text)) expect.fail(text)
      if (scanNumber(bytes, 0, bytes.length - 1) !== Number(text)) expect.fail(text)
    }
    expect(plain).toBeGreaterThan(150_000)
  })

  it.each(['0', '-0.5', '+3', '1.', '.25', '12345.6789', '1e5', '1.5E-3', '-2.5e+10', '0.000001', '123456789012345', '  42 ', '"7.5"', '3,25'])('reads %s as JavaScript does', (text) => {
    const bytes = new TextEncoder().encode(text)
    expect(scanNumber(bytes, 0, bytes.length)).toBe(Number(text.replace(',', '.').replace(/"/g, '')))
  })

  it('keeps float32 precision beyond 15 digits', () => {
    for (const text of ['0.12345678901234567890', '98765432109876543210', '3.4028234663852886e38', '1.17549435e-38']) {
      const bytes = new TextEncoder().encode(text)
      expect(Math.fround(scanNumber(bytes, 0, bytes.length))).toBe(Math.fround(Number(text)))
    }
  })

  it.each(['', ' ', '-', '.', 'abc', '1.2.3', '1e', '1e+', '12a', '1-2', '0x10', 'NaN'])('does not take “%s” for a number', (text) => {
    const bytes = new TextEncoder().encode(text)
    expect(scanNumber(bytes, 0, bytes.length)).toBeNaN()
  })
})
