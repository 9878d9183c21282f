import { classifyFrames, groupTruths, type FrameTruth, type GroupTruth } from './classify'
import type { FrameRenderer } from './frames'
import { fieldArrays, type FieldArrays } from './modeField'
import { makeScene } from './scene'
import type { Scenario } from './scenario'
import { frameIntegrals } from './timeline'

/** What a perfect evaluation would find. */
export interface Truth {
  alignment: { offsetSeconds: number, driftPpm: number }
  frameCount: number
  frames: FrameTruth[]
  groups: GroupTruth[]
  /** Mean linear light of each frame, without noise and rounding, over the whole image. */
  meanLight: number[]
  /** (1/T)∫L dt of each frame, V over dark. */
  lampVolts: number[]
  lines: { line: number, frequencyHz: number, forceNewtons: readonly [number, number] }[]
}

export function makeTruth(scenario: Scenario, renderer: FrameRenderer): Truth {
  const { timeline } = renderer
  const frames = Array.from({ length: scenario.camera.frameCount }, (_, frame) => frame)
  return {
    alignment: { ...scenario.clock },
    frameCount: scenario.camera.frameCount,
    frames: classifyFrames(scenario, 0.001, timeline),
    groups: groupTruths(scenario, 0.001, 0.0005, timeline),
    meanLight: frames.map(frame => renderer.meanLight(frame)),
    lampVolts: frames.map(frame => frameIntegrals(timeline, frame, 0).a),
    lines: scenario.lines.map(({ frequencyHz, forceNewtons }, index) => ({ line: index + 1, frequencyHz, forceNewtons })),
  }
}

export interface LineImages {
  /** s(x), linear light per V: with sums of E over frames, I = A·s + C·p + S·q + frames·background. */
  scene: Float64Array
  /** p = −∇s·Re U and q = +∇s·Im U, with the exact gradient: the small-motion limit. */
  p: Float64Array
  q: Float64Array
  /** U(x) in pixels, x right, y down. */
  field: FieldArrays
}

/** True images of a line (counting from 1) for a camera in its first pose. */
export function lineImages(scenario: Scenario, line: number): LineImages {
  const { width, height } = scenario
  const picture = makeScene(scenario.scene, width, height)
  const field = fieldArrays(scenario.lines[line - 1]!.field, width, height)
  const make = () => new Float64Array(width * height)
  const images = { scene: make(), p: make(), q: make(), field }
  const gain = scenario.camera.lightPerVolt
  for (let row = 0, at = 0; row < height; row++) {
    for (let column = 0; column < width; column++, at++) {
      const gx = gain * slope(offset => picture(column + offset, row))
      const gy = gain * slope(offset => picture(column, row + offset))
      images.scene[at] = gain * picture(column, row)
      images.p[at] = -gx * field.uxReal[at]! - gy * field.uyReal[at]!
      images.q[at] = gx * field.uxImaginary[at]! + gy * field.uyImaginary[at]!
    }
  }
  return images
}

/** Derivative at 0 by the five-point rule with steps of 0.01 px: exact to 10⁻⁹ for pictures as smooth as these. */
function slope(value: (offset: number) => number): number {
  const step = 0.01
  return (value(-2 * step) - 8 * value(-step) + 8 * value(step) - value(2 * step)) / (12 * step)
}
