import { makeSpeckle, type Picture } from './speckle'

interface Paint {
  seed: number
  /** Standard deviation of the spots, which is the blur of lens and pixel together. */
  blurPixels: number
  /** rms of the paint over its mean, about 0.1 to 0.5. */
  contrast: number
}

/** What stands before the camera. Brightness is reflectance, 0 to 1. */
export type SceneSpec
  /** The same everywhere. */
  = | { kind: 'flat', brightness: number }
  /** mean + amplitude·cos(kx·x + ky·y + phase), wave numbers in radians per pixel. */
    | { kind: 'grating', mean: number, amplitude: number, kx: number, ky: number, phaseRadians: number }
  /** Painted all over: no edges, for checks of numbers. */
    | { kind: 'speckle' } & Paint
  /** A painted plate with rounded corners, holes and two ribs before black cloth. */
    | { kind: 'panel' } & Paint
  /** A painted disc with a bore and a circle of bolt holes before black cloth. */
    | { kind: 'disc' } & Paint

const meanReflectance = 0.5
const clothReflectance = 0.035

/** Reflectance s(x) of the scene, an exact formula at any point. */
export function makeScene(spec: SceneSpec, width: number, height: number): Picture {
  switch (spec.kind) {
    case 'flat': return () => spec.brightness
    case 'grating': return (x, y) => spec.mean + spec.amplitude * Math.cos(spec.kx * x + spec.ky * y + spec.phaseRadians)
    case 'speckle': return makePaint(spec, width, height)
    case 'panel': return beforeCloth(makePaint(spec, width, height), panelShape(width, height), spec, width, height)
    case 'disc': return beforeCloth(makePaint(spec, width, height), discShape(width, height), spec, width, height)
  }
}

/** Heights far from the mean are bent back smoothly, so that paint is never blacker than black. */
function makePaint(paint: Paint, width: number, height: number): Picture {
  const speckle = makeSpeckle(paint.seed, paint.blurPixels, width, height)
  const most = 0.85
  return (x, y) => meanReflectance * (1 + most * Math.tanh(speckle(x, y) * paint.contrast / most))
}

interface Shape {
  /** Distance to the outline in pixels, positive inside the material. */
  inside: Picture
  /** Factor on the paint: countersinks and ribs. */
  shade: Picture
}

function beforeCloth(paint: Picture, shape: Shape, spec: Paint, width: number, height: number): Picture {
  const weave = makeSpeckle(spec.seed + 77, 3 * spec.blurPixels, width, height)
  return (x, y) => {
    const material = 0.5 * (1 + Math.tanh(shape.inside(x, y) / (1.2 * spec.blurPixels)))
    const cloth = clothReflectance * (1 + 0.15 * Math.tanh(weave(x, y)))
    if (material < 1e-9) return cloth
    return cloth + material * (paint(x, y) * shape.shade(x, y) - cloth)
  }
}

const ring = (distance: number, width: number) => Math.exp(-((distance / width) ** 2))

function withHoles(outline: Picture, holes: { x: number, y: number, radius: number }[], shade: Picture): Shape {
  return {
    inside: (x, y) => holes.reduce((least, hole) => Math.min(least, Math.hypot(x - hole.x, y - hole.y) - hole.radius), outline(x, y)),
    shade: (x, y) => holes.reduce((factor, hole) => factor * (1 - 0.45 * ring(Math.hypot(x - hole.x, y - hole.y) - hole.radius - 3, 2.5)), shade(x, y)),
  }
}

function panelShape(width: number, height: number): Shape {
  const corner = 0.08 * height
  const halfWidth = 0.43 * width
  const halfHeight = 0.41 * height
  const outline: Picture = (x, y) => {
    const dx = Math.abs(x - width / 2) - halfWidth + corner
    const dy = Math.abs(y - height / 2) - halfHeight + corner
    return corner - Math.hypot(Math.max(dx, 0), Math.max(dy, 0)) - Math.min(Math.max(dx, dy), 0)
  }
  const bolts = [-1, 1].flatMap(sx => [-1, 1].map(sy => ({ x: width / 2 + sx * 0.38 * width, y: height / 2 + sy * 0.33 * height, radius: 0.035 * height })))
  const holes = [{ x: 0.33 * width, y: 0.45 * height, radius: 0.13 * height }, { x: 0.66 * width, y: 0.56 * height, radius: 0.09 * height }, ...bolts]
  return withHoles(outline, holes, (x, y) => 1 - 0.25 * ring(x - 0.5 * width, 2.5) - 0.25 * ring(y - 0.78 * height, 2.5) * Number(Math.abs(x - width / 2) < halfWidth))
}

function discShape(width: number, height: number): Shape {
  const centre = { x: width / 2, y: height / 2 }
  const distance: Picture = (x, y) => Math.hypot(x - centre.x, y - centre.y)
  const holes = Array.from({ length: 8 }, (_, i) => {
    const angle = (i + 0.5) * Math.PI / 4
    return { x: centre.x + 0.34 * height * Math.cos(angle), y: centre.y + 0.34 * height * Math.sin(angle), radius: 0.035 * height }
  })
  return withHoles((x, y) => 0.45 * height - distance(x, y), [{ ...centre, radius: 0.12 * height }, ...holes], (x, y) => 1 - 0.25 * ring(distance(x, y) - 0.24 * height, 2.5))
}
