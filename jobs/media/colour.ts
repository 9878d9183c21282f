import type { CodeRange, Flag, KnownCodeRange, KnownTransfer, Transfer } from '../../shared/measurement'
import { MediaError } from './mediaError'

interface Resolved<T> {
  value: T
  source: 'stream' | 'setting' | 'assumed'
  flags: Flag[]
}

/**
 * ffmpeg's names of the transfer code points of Rec. ITU-T H.273 table 3. Code points 1, 6, 14 and 15 share one curve,
 * and 11 and 12 agree with it between black and white.
 */
const transfers: Record<string, KnownTransfer> = {
  'bt709': 'bt709', 'smpte170m': 'bt709', 'bt2020-10': 'bt709', 'bt2020-12': 'bt709', 'iec61966-2-4': 'bt709', 'bt1361e': 'bt709',
  'iec61966-2-1': 'srgb',
  'linear': 'linear',
  'bt470m': 'gamma22', 'gamma22': 'gamma22',
}

/**
 * Decide how codes become light: the setting, else what the stream declares, else BT.709 with a flag.
 *
 * @param declared ffmpeg's `color_transfer`
 * @throws MediaError `transfer-unsupported` for a declared curve that is not in the table, unless the setting decides
 */
export function resolveTransfer(setting: Transfer, declared: string | undefined): Resolved<KnownTransfer> {
  const stream = declared === undefined ? undefined : transfers[declared]
  if (setting !== 'auto') {
    const differs = declared !== undefined && stream !== setting
    return { value: setting, source: 'setting', flags: differs ? [flag('transfer-differs', 'warning', `The clip declares the transfer ${declared}, but the acquisition’s setting ${setting} is used. Check which one the camera was set to.`)] : [] }
  }
  if (stream) return { value: stream, source: 'stream', flags: [] }
  if (declared !== undefined) throw new MediaError('transfer-unsupported', `The clip declares the transfer ${declared}, which is not supported. Record with a standard (BT.709) profile, or set the acquisition’s transfer by hand.`)
  return { value: 'bt709', source: 'assumed', flags: [flag('transfer-assumed', 'note', 'The clip does not say how its codes relate to light: BT.709 is assumed. If the camera has another profile, set the acquisition’s transfer.')] }
}

/**
 * Decide which codes are black and white: the setting, else what the stream declares, else limited (grey formats: full,
 * as ffmpeg treats them) with a flag.
 *
 * @param declared ffmpeg's `color_range`
 */
export function resolveRange(setting: CodeRange, declared: string | undefined, isGray: boolean): Resolved<KnownCodeRange> {
  const stream = declared === 'pc' ? 'full' : declared === 'tv' ? 'limited' : undefined
  if (setting !== 'auto') {
    const differs = stream !== undefined && stream !== setting
    return { value: setting, source: 'setting', flags: differs ? [flag('range-differs', 'warning', `The clip declares ${stream} range, but the acquisition’s setting ${setting} is used. Check which one the camera was set to.`)] : [] }
  }
  if (stream) return { value: stream, source: 'stream', flags: [] }
  const value = isGray ? 'full' : 'limited'
  return { value, source: 'assumed', flags: [flag('range-assumed', 'note', `The clip does not say whether its codes are of limited or full range: ${value} is assumed. If black looks grey or clipped, set the acquisition’s range.`)] }
}

const flag = (code: string, severity: Flag['severity'], message: string): Flag => ({ code, severity, message })
