/** Universal files by the published layout of dataset 58, written from its FORMAT statements (from memory). */

export interface UffChannel {
  title?: string
  node?: number
  direction?: number
  functionType?: number
  label?: string
  unit?: string
  dataType?: number
  abscissaType?: number
  abscissaUnit?: string
  values: readonly number[]
  isDouble?: boolean
  isComplex?: boolean
  step?: number
  first?: number
  /** Uneven spacing. */
  times?: readonly number[]
  binary?: 'little' | 'big'
  /** Eight-byte abscissas in an uneven binary block of double precision. */
  wideAbscissa?: boolean
}

const right = (value: number | string, width: number) => String(value).padStart(width)
const left = (value: string, width: number) => value.slice(0, width).padEnd(width)
/** Fortran's Ew.d in normal form: "1.95313E-05". */
export const exponential = (value: number, width: number, digits: number) => {
  const [mantissa, exponent] = value.toExponential(digits).split('e')
  const power = Number(exponent)
  return `${mantissa}E${power < 0 ? '-' : '+'}${String(Math.abs(power)).padStart(2, '0')}`.padStart(width)
}
const axis = (type: number, label: string, unit: string) => `${right(type, 10)}${right(0, 5)}${right(0, 5)}${right(0, 5)} ${left(label, 20)} ${left(unit, 20)}`

function header(channel: UffChannel): string[] {
  const { title = 'NONE', node = 0, direction = 0, functionType = 1, label = 'NONE', unit = 'NONE', dataType = 0, abscissaType = 17, abscissaUnit = 's', isDouble = false, isComplex = false, times } = channel
  const type = (isComplex ? 5 : 2) + (isDouble ? (isComplex ? 1 : 2) : 0)
  return [
    title, 'NONE', '01-Jan-00 00:00:00', 'NONE', 'NONE',
    `${right(functionType, 5)}${right(0, 10)}${right(0, 5)}${right(0, 10)} ${left('NONE', 10)}${right(node, 10)}${right(direction, 4)} ${left('NONE', 10)}${right(0, 10)}${right(0, 4)}`,
    `${right(type, 10)}${right(channel.values.length, 10)}${right(times ? 0 : 1, 10)}${exponential(times ? 0 : channel.first ?? 0, 13, 5)}${exponential(times ? 0 : channel.step ?? 0.001, 13, 5)}${exponential(0, 13, 5)}`,
    axis(abscissaType, 'Time', abscissaUnit), axis(dataType, label, unit), axis(0, 'NONE', 'NONE'), axis(0, 'NONE', 'NONE'),
  ]
}

function textData({ values, isDouble, times }: UffChannel): string[] {
  const [width, digits] = isDouble ? [20, 12] : [13, 5]
  const fields = values.flatMap((value, i) => [...times ? [exponential(times[i], 13, 5)] : [], exponential(value, width, digits)])
  const perLine = isDouble ? 4 : 6
  return Array.from({ length: Math.ceil(fields.length / perLine) }, (_, i) => fields.slice(i * perLine, (i + 1) * perLine).join(''))
}

function binaryData({ values, isDouble, times, binary, wideAbscissa }: UffChannel): Uint8Array {
  const numbers = values.flatMap((value, i) => [...times ? [{ value: times[i], bytes: wideAbscissa ? 8 : 4 }] : [], { value, bytes: isDouble ? 8 : 4 }])
  const view = new DataView(new ArrayBuffer(numbers.reduce((sum, { bytes }) => sum + bytes, 0)))
  let at = 0
  for (const { value, bytes } of numbers) {
    if (bytes === 8) view.setFloat64(at, value, binary === 'little')
    else view.setFloat32(at, value, binary === 'little')
    at += bytes
  }
  return new Uint8Array(view.buffer)
}

function dataset(channel: UffChannel, end: string): Uint8Array[] {
  const encode = (lines: string[]) => new TextEncoder().encode(lines.map(line => line + end).join(''))
  if (!channel.binary) return [encode(['    -1', '    58', ...header(channel), ...textData(channel), '    -1'])]
  const data = binaryData(channel)
  const kind = `${right(58, 6)}b${right(channel.binary === 'little' ? 1 : 2, 6)}${right(2, 6)}${right(11, 12)}${right(data.length, 12)}${right(0, 6)}${right(0, 6)}${right(0, 12)}${right(0, 12)}`
  return [encode(['    -1', kind, ...header(channel)]), data, encode(['    -1'])]
}

export function universalFile(channels: readonly UffChannel[], { before = '', end = '\n' } = {}): Uint8Array {
  return Uint8Array.from(Buffer.concat([new TextEncoder().encode(before), ...channels.flatMap(channel => dataset(channel, end))]))
}
