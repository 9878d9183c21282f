/**
 * Colour maps of 256 steps, packed for ImageData (little-endian RGBA). Built in OKLab (Björn Ottosson, 2020: "A
 * perceptual color space for image processing"), where even steps of L look even; chroma gives way where sRGB ends.
 * Gray: scenes and means. Ember (dark to pale amber): noise, amounts from 0 up. Split (blue · black · amber): p and q,
 * with 0 in the middle.
 */
export type ColourMapName = 'gray' | 'ember' | 'split'
export type Rgb = [red: number, green: number, blue: number]

export const mapSteps = 256

function okLabToLinear(l: number, a: number, b: number): Rgb {
  const long = (l + 0.3963377774 * a + 0.2158037573 * b) ** 3
  const middle = (l - 0.1055613458 * a - 0.0638541728 * b) ** 3
  const short = (l - 0.0894841775 * a - 1.291485548 * b) ** 3
  return [
    4.0767416621 * long - 3.3077115913 * middle + 0.2309699292 * short,
    -1.2684380046 * long + 2.6097574011 * middle - 0.3413193965 * short,
    -0.0041960863 * long - 0.7034186147 * middle + 1.707614701 * short,
  ]
}
const inGamut = (rgb: Rgb) => rgb.every(value => value >= -1e-4 && value <= 1.0001)
const encode = (value: number) => Math.round(255 * Math.max(0, Math.min(1, value <= 0.0031308 ? 12.92 * value : 1.055 * value ** (1 / 2.4) - 0.055)))

/** Lightness 0…1, chroma, hue in degrees to sRGB codes; chroma is lowered until the colour exists. */
export function okLchToRgb(lightness: number, chroma: number, hueDeg: number): Rgb {
  const at = (c: number) => okLabToLinear(lightness, c * Math.cos(hueDeg * Math.PI / 180), c * Math.sin(hueDeg * Math.PI / 180))
  if (inGamut(at(chroma))) return at(chroma).map(encode) as Rgb
  let [low, high] = [0, chroma]
  for (let step = 0; step < 20; step++) {
    const middle = (low + high) / 2
    if (inGamut(at(middle))) low = middle
    else high = middle
  }
  return at(low).map(encode) as Rgb
}

const maps: Record<ColourMapName, (share: number) => Rgb> = {
  gray: share => Array(3).fill(Math.round(255 * share)) as Rgb,
  ember: share => okLchToRgb(0.14 + 0.82 * share, 0.16 * Math.sin(Math.PI * Math.min(1, share * 0.9 + 0.05)), 35 + 60 * share),
  split: (share) => {
    const way = Math.abs(2 * share - 1)
    return okLchToRgb(0.16 + 0.72 * way, 0.17 * Math.min(1, way * 1.6), share < 0.5 ? 250 : 65)
  },
}

export function mapColours(name: ColourMapName): Rgb[] {
  return Array.from({ length: mapSteps }, (_, index) => maps[name](index / (mapSteps - 1)))
}

const built = new Map<ColourMapName, Uint32Array>()
export function colourMap(name: ColourMapName): Uint32Array {
  const known = built.get(name)
  if (known) return known
  const map = Uint32Array.from(mapColours(name), ([red, green, blue]) => (0xFF000000 | blue << 16 | green << 8 | red) >>> 0)
  built.set(name, map)
  return map
}

export function mapGradient(name: ColourMapName): string {
  const colours = mapColours(name)
  return `linear-gradient(to right, ${Array.from({ length: 17 }, (_, index) => `rgb(${colours[Math.round(index * 255 / 16)]!.join(' ')})`).join(', ')})`
}
