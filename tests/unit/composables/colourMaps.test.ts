import { describe, expect, it } from 'vitest'
import { colourMap, mapColours, mapSteps, okLchToRgb, type Rgb } from '../../../composables/colourMaps'

/** CIE 1976 L* of an sRGB colour (IEC 61966-2-1 transfer, D65 luminance), computed here from the codes alone. */
function lightness([red, green, blue]: Rgb): number {
  const linear = [red, green, blue].map(code => code / 255).map(value => value <= 0.04045 ? value / 12.92 : ((value + 0.055) / 1.055) ** 2.4)
  const y = 0.2126 * linear[0]! + 0.7152 * linear[1]! + 0.0722 * linear[2]!
  return y > (6 / 29) ** 3 ? 116 * Math.cbrt(y) - 16 : y * (29 / 3) ** 3
}
/** Steps of L* over blocks of 16 colours, against their mean: single steps are lost in the rounding to codes. */
function unevenness(lights: number[]): number {
  const steps = Array.from({ length: Math.floor((lights.length - 1) / 16) }, (_, index) => lights[(index + 1) * 16]! - lights[index * 16]!)
  const mean = steps.reduce((sum, step) => sum + step, 0) / steps.length
  return Math.max(...steps.map(step => Math.abs(step / mean - 1)))
}

describe('colour maps', () => {
  it('turns OKLab white and black into sRGB white and black', () => {
    expect(okLchToRgb(1, 0, 0)).toEqual([255, 255, 255])
    expect(okLchToRgb(0, 0, 0)).toEqual([0, 0, 0])
  })
  it('keeps the hue of a colour outside sRGB by giving up chroma, not lightness', () => {
    const [tooMuch, possible] = [okLchToRgb(0.7, 0.4, 250), okLchToRgb(0.7, 0.05, 250)]
    expect(Math.abs(lightness(tooMuch) - lightness(possible))).toBeLessThan(3)
  })
  it('lets ember rise evenly: each step of the scale looks as large as any other', () => {
    const lights = mapColours('ember').map(lightness)
    expect(lights.every((light, index) => index === 0 || light >= lights[index - 1]! - 0.4)).toBe(true)
    expect(unevenness(lights)).toBeLessThan(0.1)
  })
  it('lets split rise evenly from a neutral dark middle to both ends', () => {
    const colours = mapColours('split')
    const [cold, warm] = [colours.slice(0, 128).reverse().map(lightness), colours.slice(128).map(lightness)]
    for (const side of [cold, warm]) expect(unevenness(side)).toBeLessThan(0.1)
    const [middle] = colours.slice(128)
    expect(Math.max(...middle!) - Math.min(...middle!)).toBeLessThan(6)
    for (let index = 0; index < 128; index += 8) expect(Math.abs(cold[index]! - warm[index]!)).toBeLessThan(2)
  })
  it('tells cold from warm without red against green: blue rules one side, red the other', () => {
    const colours = mapColours('split')
    expect(colours[20]![2]).toBeGreaterThan(colours[20]![0]! + 40)
    expect(colours[235]![0]).toBeGreaterThan(colours[235]![2]! + 40)
  })
  it('packs red in the lowest byte and is opaque, as ImageData wants it', () => {
    const map = colourMap('ember')
    const bytes = new Uint8Array(map.buffer)
    expect(map).toHaveLength(mapSteps)
    expect([...bytes.slice(200 * 4, 201 * 4)]).toEqual([...mapColours('ember')[200]!, 255])
  })
})
