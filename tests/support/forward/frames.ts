import { lampIntegral } from './lamp'
import { motionBasis, type MotionBasis } from './basis'
import { gaussianRandom, seededRandom } from './random'
import { frameWindow, stretchesOf, type Timeline } from './timeline'

/** Renders frames in linear light; the moving scene is prepared once for each line and camera pose. */
export class FrameRenderer {
  private readonly bases = new Map<string, MotionBasis>()
  constructor(readonly timeline: Timeline) {}

  private basisOf(line: number, pose: number): MotionBasis {
    const key = `${line}/${pose}`
    let basis = this.bases.get(key)
    if (!basis) {
      const { dxPixels, dyPixels } = this.timeline.poses[pose]!
      this.bases.set(key, basis = motionBasis(this.timeline.scenario, line, dxPixels, dyPixels))
    }
    return basis
  }

  /** Images and their weights that add up to a frame: light·(1/T)∫(L + ambient)·e^{jnωt} dt for each harmonic n. */
  private parts(frame: number): { basis: MotionBasis, weights: number[] }[] {
    const { scenario } = this.timeline
    const window = frameWindow(scenario, frame)
    const scale = scenario.camera.lightPerVolt / (window.endSeconds - window.startSeconds)
    return stretchesOf(this.timeline, window).map(({ regime, line, pose, startSeconds, endSeconds }) => {
      const omega = 2 * Math.PI * (scenario.lines[line]?.frequencyHz ?? 0)
      const weights: number[] = []
      for (let n = 0; n <= scenario.harmonics; n++) {
        const [cosine, sine] = lampIntegral(regime, startSeconds, endSeconds, n * omega, scenario.camera.ambientVolts)
        weights.push(scale * cosine)
        if (n > 0) weights.push(scale * sine)
      }
      return { basis: this.basisOf(line, pose), weights }
    })
  }

  /** Linear light of every pixel, without noise and before any rounding. */
  light(frame: number, out = new Float64Array(this.timeline.scenario.width * this.timeline.scenario.height)): Float64Array {
    out.fill(this.timeline.scenario.camera.blackLight)
    for (const { basis, weights } of this.parts(frame)) {
      weights.forEach((weight, i) => {
        if (Math.abs(weight) < 1e-9) return
        const image = basis.images[i]!
        for (let at = 0; at < out.length; at++) out[at]! += weight * image[at]!
      })
    }
    return out
  }

  /** Mean over the image of the same. */
  meanLight(frame: number): number {
    return this.parts(frame).reduce((sum, { basis, weights }) => sum + weights.reduce((part, weight, i) => part + weight * basis.means[i]!, 0), this.timeline.scenario.camera.blackLight)
  }
}

const noiseTableLength = 1 << 18

/** Adds sensor noise in place. Rows read a long seeded table from random places: quick, and independent between frames. */
export function makeSensorNoise(seed: number, width: number, readNoise: number, shotNoise: number): (light: Float64Array) => void {
  if (readNoise === 0 && shotNoise === 0) return () => {}
  const normal = gaussianRandom(seed)
  const table = Float32Array.from({ length: noiseTableLength + width }, normal)
  const uniform = seededRandom(seed + 1)
  const readVariance = readNoise ** 2
  const shotVariance = shotNoise ** 2
  return (light) => {
    for (let row = 0; row < light.length; row += width) {
      const start = Math.floor(uniform() * noiseTableLength)
      for (let column = 0; column < width; column++) {
        const value = light[row + column]!
        light[row + column] = value + table[start + column]! * Math.sqrt(readVariance + shotVariance * (value > 0 ? value : 0))
      }
    }
  }
}
