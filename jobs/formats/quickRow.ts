import { carriageReturn, comma, minus, newline, point, zero } from './asciiBytes'
import { powersOfTen } from './numberScan'

/** So many digits are exact as integers, and dividing by a power of ten rounds once. */
const mostDigits = 15

/**
 * Reads a row of plain numbers ("-12.345", "7,5") in one pass over its bytes: what nearly every row of a record is.
 * The values are those of `scanNumber`.
 */
export class QuickRow {
  /**
   * @param delimiter its byte; −1 for a single column
   * @param places column → place in `values`, −1 for a column that is not wanted; the last one is wanted
   * @param values where the numbers go
   */
  constructor(private readonly delimiter: number, private readonly places: number[], private readonly values: Float64Array) {}

  /**
   * @param from start of a line whose end is among the bytes
   * @returns where the next line begins; 0 when the row has to be read the thorough way
   */
  read(bytes: Uint8Array, from: number): number {
    const { delimiter, places, values } = this
    const last = places.length - 1
    let at = from
    for (let column = 0; column < last; column++) {
      const place = places[column]
      at = place < 0 ? skip(bytes, at, delimiter) : number(bytes, at, delimiter, place, values)
      if (at === 0 || bytes[at] !== delimiter) return 0
      at++
    }
    at = number(bytes, at, delimiter, places[last], values)
    if (at === 0) return 0
    if (bytes[at] === carriageReturn) at++
    if (bytes[at] === newline) return at + 1
    return bytes[at] === delimiter ? bytes.indexOf(newline, at) + 1 : 0
  }
}

/** @returns where the cell ends, at its delimiter or at the line's end */
function skip(bytes: Uint8Array, from: number, delimiter: number): number {
  let at = from
  while (bytes[at] !== delimiter && bytes[at] !== newline) at++
  return at
}

/** @returns where the number ends; 0 when it is not plain */
function number(bytes: Uint8Array, from: number, delimiter: number, place: number, values: Float64Array): number {
  const negative = bytes[from] === minus
  const first = negative ? from + 1 : from
  let at = first
  let mantissa = 0
  let pointAt = -1
  for (;; at++) {
    const byte = bytes[at]
    if (byte >= zero && byte <= zero + 9) mantissa = mantissa * 10 + (byte - zero)
    else if ((byte === point || byte === comma) && byte !== delimiter && pointAt < 0) pointAt = at
    else break
  }
  const digits = at - first - (pointAt < 0 ? 0 : 1)
  if (digits < 1 || digits > mostDigits) return 0
  const value = pointAt < 0 ? mantissa : mantissa / powersOfTen[at - pointAt - 1]
  values[place] = negative ? -value : value
  return at
}
