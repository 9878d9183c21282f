/**
 * Colour maps of 256 steps, packed for ImageData (little-endian RGBA). Even steps of CIE 1976 L*; hue and chroma in
 * OKLab (Björn Ottosson, 2020: "A perceptual color space for image processing"), chroma giving way where sRGB ends.
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

/** Lightness 0…1, chroma, hue in degrees to linear sRGB; chroma is lowered until the colour exists. */
function okLchToLinear(lightness: number, chroma: number, hueDeg: number): Rgb {
  const at = (c: number) => okLabToLinear(lightness, c * Math.cos(hueDeg * Math.PI / 180), c * Math.sin(hueDeg * Math.PI / 180))
  if (inGamut(at(chroma))) return at(chroma)
  return at(bisect(0, chroma, c => inGamut(at(c))))
}
export function okLchToRgb(lightness: number, chroma: number, hueDeg: number): Rgb {
  return okLchToLinear(lightness, chroma, hueDeg).map(encode) as Rgb
}

/** The largest value between low and high that still passes. */
function bisect(low: number, high: number, passes: (value: number) => boolean): number {
  for (let step = 0; step < 24; step++) {
    const middle = (low + high) / 2
    if (passes(middle)) low = middle
    else high = middle
  }
  return low
}

/** A colour of this CIE 1976 L* (0…100): chroma and hue in OKLCh, lightness moved until the luminance fits. */
function ofLightness(lStar: number, chroma: number, hueDeg: number): Rgb {
  const luminance = lStar > 8 ? ((lStar + 16) / 116) ** 3 : lStar * (3 / 29) ** 3
  const lightness = bisect(0, 1, (candidate) => {
    const [red, green, blue] = okLchToLinear(candidate, chroma, hueDeg)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue <= luminance
  })
  return okLchToRgb(lightness, chroma, hueDeg)
}

const maps: Record<ColourMapName, (share: number) => Rgb> = {
  gray: share => Array(3).fill(Math.round(255 * share)) as Rgb,
  ember: share => ofLightness(3 + 93 * share, 0.17 * Math.sin(Math.PI * (0.08 + 0.84 * share)), 35 + 60 * share),
  split: (share) => {
    const way = Math.abs(2 * share - 1)
    return ofLightness(3 + 82 * way, 0.17 * Math.min(1, way * 1.6), share < 0.5 ? 250 : 65)
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
