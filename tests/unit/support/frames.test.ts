import { describe, expect, it } from 'vitest'
import { buildSchedule, defineScenario, fieldAt, FrameRenderer, lineImages, makeTimeline, renderLuma, type ScenarioInput } from '../../support/forward'
import { makeScene } from '../../support/forward/scene'
import { makeSensorNoise } from '../../support/forward/frames'

const schedule = (frequencyHz: number) => buildSchedule({ startSeconds: 0, lines: [{ frequencyHz, repetitions: 1 }], darkSeconds: 0.4, referenceSeconds: 1, phaseSeconds: 1, levelVolts: 1.5, depth: 0.8 })
const still = { frequencyHz: 200, forceNewtons: [0, 0] as const, field: [] }
const rendererOf = (input: Omit<ScenarioInput, 'lamp'>, frequencyHz = 200) => new FrameRenderer(makeTimeline(defineScenario({ width: 48, height: 32, lamp: { regimes: schedule(frequencyHz) }, ...input })))
const scene = { kind: 'speckle' as const, seed: 3, blurPixels: 1.6, contrast: 0.35 }

describe('frames of the forward model', () => {
  it('show the scene times the light under a constant lamp', () => {
    const renderer = rendererOf({ scene, lines: [still], camera: { lightPerVolt: 0.4, blackLight: 0.01, ambientVolts: 0.1 } })
    const picture = makeScene(scene, 48, 32)
    const light = renderer.light(30)
    for (const [x, y] of [[0, 0], [20, 11], [47, 31]] as const) expect(light[y * 48 + x]).toBeCloseTo(0.01 + 0.4 * 1.6 * picture(x, y), 6)
  })

  it('show ambient light and black level only when the lamp is off', () => {
    const light = rendererOf({ scene: { kind: 'flat', brightness: 0.5 }, lines: [still], camera: { lightPerVolt: 0.4, blackLight: 0.01, ambientVolts: 0.1 } }).light(5)
    for (const value of light) expect(value).toBeCloseTo(0.01 + 0.4 * 0.1 * 0.5, 7)
  })

  it('have the mean that truth states', () => {
    const renderer = rendererOf({ scene, lines: [{ ...still, field: [{ ux: [0.2, 0.1], uy: [0, 0.1], halfWavesX: 1 }] }] })
    for (const frame of [3, 19, 70, 95]) expect(renderer.meanLight(frame)).toBeCloseTo(renderer.light(frame).reduce((sum, value) => sum + value, 0) / (48 * 32), 8)
  })

  it.each([[6, 2e-5], [3, 1e-4]])('equal the exposure integral by brute force, whole periods or not, regimes changing or not: %i harmonics within %s of white', (harmonics, tolerance) => {
    const frequencyHz = 187.3
    const field = [{ ux: [0.25, -0.1] as const, uy: [0, 0.1] as const, halfWavesX: 1 }, { ux: [0, 0] as const, uy: [-0.15, 0.2] as const, halfWavesY: 2 }]
    const renderer = rendererOf({ harmonics, scene, lines: [{ ...still, frequencyHz, field }], clock: { offsetSeconds: 0.0037, driftPpm: 40 }, camera: { exposureSeconds: 0.017, blackLight: 0 } }, frequencyHz)
    const picture = makeScene(scene, 48, 32)
    const omega = 2 * Math.PI * frequencyHz
    const lamp = (t: number) => t < 0.4 ? 0 : t < 1.4 ? 1.5 : 1.5 * (1 + 0.8 * Math.sin(omega * t + (t < 2.4 ? 0 : Math.PI / 2)))
    for (const frame of [19, 40, 69, 75, 119, 130]) {
      const start = 0.0037 + 1.00004 * frame / 50
      const light = renderer.light(frame)
      for (const [x, y] of [[7, 9], [30, 20], [41, 3]] as const) {
        const { ux, uy } = fieldAt(field, x, y, 48, 32)
        const steps = 20_000
        let sum = 0
        for (let i = 0; i < steps; i++) {
          const t = start + (i + 0.5) / steps * 0.017 * 1.00004
          const [c, s] = [Math.cos(omega * t), Math.sin(omega * t)]
          sum += lamp(t) * picture(x - ux[0] * c + ux[1] * s, y - uy[0] * c + uy[1] * s)
        }
        expect(Math.abs(light[y * 48 + x]! - 0.4 * sum / steps)).toBeLessThan(tolerance)
      }
    }
  })

  it('move as a whole after a bump', () => {
    const renderer = rendererOf({ scene, lines: [still], camera: { blackLight: 0, bumps: [{ atClipSeconds: 0.8, dxPixels: 2, dyPixels: -1 }] } })
    const before = renderer.light(35)
    const after = renderer.light(42)
    for (const [x, y] of [[5, 5], [30, 20]] as const) expect(after[(y - 1) * 48 + x + 2]).toBeCloseTo(before[y * 48 + x]!, 6)
  })
})

describe('a sinusoidal grating in harmonic motion', () => {
  // Bessel values from Abramowitz & Stegun, table 9.1 (from memory).
  const besselJ0 = { 1: 0.7651976866, 0.2: 0.9900249722 }
  const besselJ1 = { 1: 0.4400505857, 0.2: 0.0995008326 }

  it.each([1, 0.2] as const)('gives 2·J1(kA)/(kA) of its motion by the three-image formula, and J0(kA) of its contrast, at kA = %s (Jacobi–Anger)', (kA) => {
    const k = 0.5
    const amplitude = kA / k
    const renderer = rendererOf({
      harmonics: 6, scene: { kind: 'grating', mean: 0.5, amplitude: 0.3, kx: k, ky: 0, phaseRadians: 0.4 },
      lines: [{ ...still, field: [{ ux: [amplitude * Math.cos(0.7), amplitude * Math.sin(0.7)], uy: [0, 0] }] }], camera: { lightPerVolt: 0.4, blackLight: 0.01 },
    })
    const sum = (first: number) => {
      const total = new Float64Array(48 * 32)
      for (let frame = first; frame < first + 5; frame++) renderer.light(frame).forEach((value, i) => total[i]! += value - 0.01)
      return total
    }
    const [reference, sine, cosine] = [sum(30), sum(80), sum(130)]
    const halfModulation = 5 * 0.4 * 1.5 * 0.8 / 2
    let p = 0
    let q = 0
    let contrast = 0
    let norm = 0
    for (let x = 0; x < 48; x++) {
      const slope = -0.3 * k * Math.sin(k * x + 0.4)
      const wave = Math.cos(k * x + 0.4)
      p += -slope * (cosine[x]! - reference[x]!) / halfModulation
      q += slope * (sine[x]! - reference[x]!) / halfModulation
      norm += slope * slope
      contrast += wave * (reference[x]! / (5 * 0.4 * 1.5) - 0.5) / 0.3
    }
    const wavePower = Array.from({ length: 48 }, (_, x) => Math.cos(k * x + 0.4) ** 2).reduce((a, b) => a + b)
    expect(Math.hypot(p, q) / norm / amplitude).toBeCloseTo(2 * besselJ1[kA] / kA, 5)
    expect(Math.atan2(q, p)).toBeCloseTo(0.7, 5)
    expect(contrast / wavePower).toBeCloseTo(besselJ0[kA], 5)
  })

  it('has the true p and q of its gradient', () => {
    const scenario = defineScenario({
      width: 48, height: 32, scene: { kind: 'grating', mean: 0.5, amplitude: 0.3, kx: 0.4, ky: 0.3, phaseRadians: 0 },
      lines: [{ ...still, field: [{ ux: [0.1, 0.2], uy: [-0.3, 0.05] }] }], lamp: { regimes: schedule(200) }, camera: { lightPerVolt: 0.4 },
    })
    const { p, q } = lineImages(scenario, 1)
    const [x, y] = [13, 21]
    const slope = -0.4 * 0.3 * Math.sin(0.4 * x + 0.3 * y)
    expect(p[y * 48 + x]).toBeCloseTo(-slope * (0.4 * 0.1 - 0.3 * 0.3), 8)
    expect(q[y * 48 + x]).toBeCloseTo(slope * (0.4 * 0.2 + 0.3 * 0.05), 8)
  })
})

describe('texture and noise', () => {
  it('correlates over distance d as exp(−d²/4σ²), the law of a sum of Gaussian spots', () => {
    const size = 400
    const speckle = makeScene({ kind: 'speckle', seed: 9, blurPixels: 2, contrast: 0.01 }, size, size)
    const values = Float64Array.from({ length: size * size }, (_, i) => (speckle(i % size, Math.floor(i / size)) - 0.5) / 0.005)
    const lagged = (lag: number) => {
      let sum = 0
      for (let y = 0; y < size; y++) for (let x = 0; x < size - lag; x++) sum += values[y * size + x]! * values[y * size + x + lag]!
      return sum / (size * (size - lag))
    }
    expect(lagged(0)).toBeCloseTo(1, 1)
    for (const lag of [2, 4]) expect(lagged(lag) / lagged(0)).toBeCloseTo(Math.exp(-lag * lag / 16), 1)
  })

  it('has noise of the stated size, with a part that grows with the light', () => {
    const addNoise = makeSensorNoise(5, 500, 0.003, 0.01)
    for (const level of [0, 0.36]) {
      const light = new Float64Array(200_000).fill(level)
      addNoise(light)
      const deviation = Math.sqrt(light.reduce((sum, value) => sum + (value - level) ** 2, 0) / light.length)
      expect(deviation / Math.sqrt(0.003 ** 2 + 0.01 ** 2 * level)).toBeCloseTo(1, 1)
    }
  })

  it('averages out over frames as independent noise does', () => {
    const addNoise = makeSensorNoise(6, 100, 0.01, 0)
    const sum = new Float64Array(5000)
    for (let frame = 0; frame < 100; frame++) {
      const light = new Float64Array(5000)
      addNoise(light)
      light.forEach((value, i) => sum[i]! += value)
    }
    const deviation = Math.sqrt(sum.reduce((total, value) => total + value * value, 0) / sum.length)
    expect(deviation / (0.01 * Math.sqrt(100))).toBeCloseTo(1, 1)
  })

  it('comes out the same from the same seed and otherwise from another', () => {
    const input = (seed: number) => defineScenario({ seed, width: 32, height: 16, lines: [still], lamp: { regimes: schedule(200) }, camera: { frameCount: 30 } })
    const last = (seed: number) => Buffer.from([...renderLuma(input(seed))].at(-1)!.buffer).toString('hex')
    expect(last(1)).toBe(last(1))
    expect(last(1)).not.toBe(last(2))
  })
})
