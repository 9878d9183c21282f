import type { Scenario } from './scenario'

type Transfer = Scenario['camera']['transfer']

/** Signal of linear light 0…1 and beyond: Rec. ITU-R BT.709-6 item 1.2, IEC 61966-2-1, none, or a power of 1/2.2. */
export function encodeLight(light: number, transfer: Transfer): number {
  switch (transfer) {
    case 'bt709': return light < 0.018 ? 4.5 * light : 1.099 * light ** 0.45 - 0.099
    case 'srgb': return light <= 0.0031308 ? 12.92 * light : 1.055 * light ** (1 / 2.4) - 0.055
    case 'linear': return light
    case 'gamma22': return Math.sign(light) * Math.abs(light) ** (1 / 2.2)
  }
}

/** Linear light of a signal: the inverse of `encodeLight`. */
export function decodeSignal(signal: number, transfer: Transfer): number {
  switch (transfer) {
    case 'bt709': return signal < 0.081 ? signal / 4.5 : ((signal + 0.099) / 1.099) ** (1 / 0.45)
    case 'srgb': return signal <= 0.04045 ? signal / 12.92 : ((signal + 0.055) / 1.055) ** 2.4
    case 'linear': return signal
    case 'gamma22': return Math.sign(signal) * Math.abs(signal) ** 2.2
  }
}

/** Code of black, and codes from black to nominal white (Rec. ITU-T H.273: 16 and 219 in 8 bits, or all codes). */
export function codeScale(range: 'limited' | 'full', bitDepth: 8 | 10): { black: number, span: number, highest: number } {
  const highest = 2 ** bitDepth - 1
  return range === 'full' ? { black: 0, span: highest, highest } : { black: 16 << (bitDepth - 8), span: 219 << (bitDepth - 8), highest }
}

/** Linear light of a luma code. */
export function lightOfCode(code: number, camera: Pick<Scenario['camera'], 'range' | 'bitDepth' | 'transfer'>): number {
  const { black, span } = codeScale(camera.range, camera.bitDepth)
  return decodeSignal((code - black) / span, camera.transfer)
}

/** Rounds linear light to the nearest code of the signal (exactly, by the light at which each code begins). */
export function makeQuantiser(camera: Pick<Scenario['camera'], 'range' | 'bitDepth' | 'transfer'>): (light: Float64Array, out: Uint8Array | Uint16Array) => void {
  const { highest } = codeScale(camera.range, camera.bitDepth)
  const begins = new Float64Array(highest + 2)
  begins[0] = -Infinity
  for (let code = 1; code <= highest; code++) begins[code] = lightOfCode(code - 0.5, camera)
  begins[highest + 1] = Infinity
  const bins = 8192
  const binsPerLight = bins / begins[highest]!
  const firstCode = new Uint16Array(bins + 1)
  for (let bin = 0, code = 0; bin <= bins; bin++) {
    while (begins[code + 1]! <= bin / binsPerLight) code++
    // One step back guards against the last bit of the division.
    firstCode[bin] = Math.max(0, code - 1)
  }
  return (light, out) => {
    for (let at = 0; at < light.length; at++) {
      const value = light[at]!
      const bin = value * binsPerLight
      let code = bin >= bins ? highest - 1 : bin > 0 ? firstCode[bin | 0]! : 0
      while (value >= begins[code + 1]!) code++
      out[at] = code
    }
  }
}
