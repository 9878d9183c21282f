import { fieldArrays } from './modeField'
import { makeScene } from './scene'
import type { Scenario } from './scenario'

/**
 * The moving scene s(x − u(x, t)) as a Fourier series in ωt: image 0 is its mean over the period, images 2n − 1 and 2n
 * belong to cos nωt and sin nωt. `means` are the means of the images.
 */
export interface MotionBasis { images: Float32Array[], means: number[] }

/** Renders the scene at equidistant phases of the motion and transforms; `line` counts from 0. */
export function motionBasis(scenario: Scenario, line: number, dxPixels: number, dyPixels: number): MotionBasis {
  const { width, height, harmonics } = scenario
  const scene = makeScene(scenario.scene, width, height)
  const field = fieldArrays(scenario.lines[line]?.field ?? [], width, height, dxPixels, dyPixels)
  const phases = 2 * harmonics + 2
  const cosines = Float64Array.from({ length: phases }, (_, j) => Math.cos(2 * Math.PI * j / phases))
  const sines = Float64Array.from({ length: phases }, (_, j) => Math.sin(2 * Math.PI * j / phases))
  const images = Array.from({ length: 2 * harmonics + 1 }, () => new Float32Array(width * height))
  const means = new Array<number>(images.length).fill(0)
  const values = new Float64Array(phases)
  for (let row = 0, at = 0; row < height; row++) {
    for (let column = 0; column < width; column++, at++) {
      for (let j = 0; j < phases; j++) {
        const ux = field.uxReal[at]! * cosines[j]! - field.uxImaginary[at]! * sines[j]!
        const uy = field.uyReal[at]! * cosines[j]! - field.uyImaginary[at]! * sines[j]!
        values[j] = scene(column - dxPixels - ux, row - dyPixels - uy)
      }
      for (let i = 0; i < images.length; i++) {
        const order = (i + 1) >> 1
        const wave = i % 2 === 1 || i === 0 ? cosines : sines
        let sum = 0
        for (let j = 0; j < phases; j++) sum += values[j]! * wave[(order * j) % phases]!
        const coefficient = sum * (i === 0 ? 1 : 2) / phases
        images[i]![at] = coefficient
        means[i]! += coefficient / (width * height)
      }
    }
  }
  return { images, means }
}
