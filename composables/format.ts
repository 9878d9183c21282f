/**
 * Numbers as the pages write them: thin spaces between thousands, a no-break space before the unit, a real minus.
 * What is not known is an en dash.
 */
const thin = '\u202F'
const space = '\u00A0'
const unknown = '–'

const missing = (value: number | null | undefined): value is null | undefined => value === null || value === undefined || !Number.isFinite(value)

/** Fixed decimals, thousands apart: 18 204, −0.413. */
export function formatNumber(value: number | null | undefined, decimals = 0): string {
  if (missing(value)) return unknown
  const [whole, fraction] = Math.abs(value).toFixed(decimals).split('.') as [string, string?]
  const grouped = whole.length > 4 ? whole.replace(/\B(?=(\d{3})+$)/g, thin) : whole
  const digits = fraction ? `${grouped}.${fraction}` : grouped
  return value < 0 && Number(value.toFixed(decimals)) !== 0 ? `−${digits}` : digits
}

/** As many decimals as `significant` figures need; very large or small values in powers of ten. */
export function formatSignificant(value: number | null | undefined, significant = 4): string {
  if (missing(value)) return unknown
  if (value === 0) return '0'
  const exponent = Math.floor(Math.log10(Math.abs(value)))
  if (exponent >= 7 || exponent < -4) {
    const [mantissa, power] = value.toExponential(significant - 1).split('e') as [string, string]
    return `${mantissa.replace('-', '−')}·10${superscript(Number(power))}`
  }
  return formatNumber(value, Math.max(0, Math.min(significant - 1 - exponent, 12)))
}

/** At most `significant` figures, without trailing zeros: for values that were typed. */
export function formatTrimmed(value: number | null | undefined, significant = 4): string {
  const text = formatSignificant(value, significant)
  return /^[^·]*\.\d*$/.test(text) ? text.replace(/\.?0+$/, '') : text
}

function superscript(power: number): string {
  return String(power).replace(/[-\d]/g, sign => sign === '-' ? '⁻' : '⁰¹²³⁴⁵⁶⁷⁸⁹'[Number(sign)]!)
}

export function formatSigned(value: number | null | undefined, decimals = 1): string {
  if (missing(value)) return unknown
  const text = formatNumber(value, decimals)
  return value > 0 && Number(value.toFixed(decimals)) !== 0 ? `+${text}` : text
}

export function withUnit(text: string, unit: string | null | undefined): string {
  return unit && text !== unknown ? `${text}${space}${unit}` : text
}

export function formatHertz(value: number | null | undefined): string {
  if (missing(value)) return unknown
  const decimals = [0, 1].find(count => value.toFixed(count) === String(Number(value.toFixed(2)))) ?? 2
  return withUnit(formatNumber(value, decimals), 'Hz')
}

export function formatSampleRate(value: number | null | undefined): string {
  if (missing(value)) return unknown
  return value >= 10_000 ? withUnit(formatNumber(value / 1000, Number.isInteger(value / 1000) ? 0 : 2), 'kHz') : formatHertz(value)
}

/** A share 0…1 in percent, without claiming 100 % before it is so. */
export function formatPercent(share: number | null | undefined, decimals = 0): string {
  if (missing(share)) return unknown
  const scale = 10 ** decimals
  const percent = share < 1 ? Math.min(Math.round(share * 100 * scale) / scale, 100 - 1 / scale) : share * 100
  return withUnit(formatNumber(percent, decimals), '%')
}

const byteUnits = ['B', 'kB', 'MB', 'GB', 'TB'] as const

export function formatBytes(bytes: number | null | undefined): string {
  if (missing(bytes)) return unknown
  let index = 0
  let value = bytes
  while (value >= 999.5 && index < byteUnits.length - 1) {
    value /= 1000
    index++
  }
  return withUnit(formatNumber(value, index > 0 && value < 9.95 ? 2 : index > 0 && value < 99.5 ? 1 : 0), byteUnits[index]!)
}

export function formatByteRate(bytesPerSecond: number | null | undefined): string {
  return missing(bytesPerSecond) ? unknown : `${formatBytes(bytesPerSecond)}/s`
}

/** Time to wait or a length of time, to the precision a person uses: 45 s, 3 min, 1 h 20 min. */
export function formatDuration(seconds: number | null | undefined): string {
  if (missing(seconds)) return unknown
  const whole = Math.max(0, Math.round(seconds))
  if (whole < 60) return withUnit(String(whole), 's')
  if (whole < 3570) return withUnit(String(Math.round(whole / 60)), 'min')
  const minutes = Math.round(whole / 60)
  const hours = Math.floor(minutes / 60)
  if (hours < 48) return minutes % 60 ? `${withUnit(String(hours), 'h')} ${withUnit(String(minutes % 60), 'min')}` : withUnit(String(hours), 'h')
  return withUnit(String(Math.round(hours / 24)), 'days')
}

/** An exposure as photographers write it, when it is one: 1/50 s. */
export function formatExposure(seconds: number | null | undefined): string {
  if (missing(seconds)) return unknown
  const inverse = 1 / seconds
  return seconds < 1 && Math.abs(inverse - Math.round(inverse)) < 0.02
    ? withUnit(`1/${Math.round(inverse)}`, 's')
    : withUnit(formatSignificant(seconds, 4), 's')
}

export function formatClock(seconds: number): string {
  return withUnit(formatNumber(seconds, 3), 's')
}

/** 1 line, 4 lines. */
export function countOf(count: number, one: string, many = `${one}s`): string {
  return `${formatNumber(count)}${space}${count === 1 ? one : many}`
}

const ordinals = ['First', 'Second', 'Third', 'Fourth', 'Fifth', 'Sixth', 'Seventh', 'Eighth', 'Ninth', 'Tenth']
export function placeInLine(place: number): string {
  return place <= ordinals.length ? `${ordinals[place - 1]} in line` : `Number ${place} in line`
}
