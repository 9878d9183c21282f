import { execFileSync } from 'node:child_process'
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { readNpz, writeNpz } from '../../../jobs/formats/npz'
import { addFrame } from '../../../jobs/imaging/accumulate'
import { estimateShift } from '../../../jobs/imaging/shift'
import { solveFrameSet, type FrameSetInput } from '../../../jobs/imaging/solve'
import { createLightTable } from '../../../jobs/media/transfer'
import { exposureIntegrals } from '../../../jobs/signal/exposureIntegrals'
import { createLightIntegrals } from '../../../jobs/signal/lightPrediction'
import { buildSchedule, defineScenario, groupTruths, lineImages, makeTimeline, recordSamples, renderLuma } from '../forward'

export interface SolveFigures {
  /** Largest difference of scene, p, q and ambient to numpy.linalg.lstsq, over the largest value of the image. */
  worstAgainstLstsq: number
  motionCases: number
  /** Largest error of dx or dy against the known shift, px. */
  worstMotionPx: number
  /** The same of OpenCV's phaseCorrelate and findTransformECC on the same pictures. */
  worstPhaseCorrelatePx: number
  worstEccPx: number
  /** Of p and q against the forward model's truth: relative amplitude, phase in degrees; worst of the takes. */
  worstAmplitude: number
  worstPhaseDeg: number
}

/** Least squares, camera motion, p and q on seeded truth; needs Debian's python3-numpy, -scipy and -opencv. */
export function solveFigures(): SolveFigures {
  return { ...lstsqFigure(), ...motionFigure(), ...forwardFigure() }
}

function inPython<T>(work: (run: <R>(script: string) => R, path: (name: string) => string) => T): T {
  const folder = mkdtempSync(join(tmpdir(), 'lampsum-figures-'))
  try {
    return work(script => JSON.parse(execFileSync('/usr/bin/python3', ['-c', `import json, numpy as np\n${script}`], { cwd: folder, encoding: 'utf8', maxBuffer: 1 << 28 })), name => join(folder, name))
  } finally {
    rmSync(folder, { recursive: true, force: true })
  }
}

/** The sums of a rendered take, solved by numpy from the exported integrals and sums. */
export function lstsqFigure(): Pick<SolveFigures, 'worstAgainstLstsq'> {
  const { input } = renderedTake(21)
  const solution = solveFrameSet(input)
  const pixels = input.width * input.height
  const all = new Uint32Array(input.sums.length * pixels)
  input.sums.forEach((sum, g) => all.set(sum, g * pixels))
  return inPython((run, path) => {
    writeFileSync(path('set.npz'), writeNpz({ sums: { dtype: 'uint32', shape: [input.sums.length, pixels], data: all }, integrals: { dtype: 'float64', shape: [input.sums.length, 3], data: input.integrals }, frames: { dtype: 'int32', shape: [input.sums.length], data: Int32Array.from(input.frames) } }))
    const theirs = run<number[][]>(`
z = np.load('set.npz'); M = np.hstack([z['integrals'], z['frames'][:, None].astype(float)])
print(json.dumps(np.linalg.lstsq(M, z['sums'].astype(float), rcond=None)[0].tolist()))`)
    const worst = [solution.scene, solution.p, solution.q, solution.ambient!].map((image, k) => image.reduce((most, value, i) => Math.max(most, Math.abs(value - theirs[k]![i]!)), 0) / Math.max(...theirs[k]!.map(Math.abs)))
    return { worstAgainstLstsq: Math.max(...worst) }
  })
}

const motionSize = { width: 220, height: 180 }

/** Speckle moved by scipy's Fourier shift, each picture with its own noise of half a percent, as a sum of fifty frames has. */
export function motionFigure(cases = 24): Pick<SolveFigures, 'motionCases' | 'worstMotionPx' | 'worstPhaseCorrelatePx' | 'worstEccPx'> {
  const { width, height } = motionSize
  return inPython((run, path) => {
    const made = run<{ shifts: [number, number][], phase: [number, number][], ecc: [number, number][] }>(`
import cv2
from scipy import ndimage
cv2.setNumThreads(1)
crop = lambda x: np.ascontiguousarray(np.rint(x[20:-20, 20:-20]).clip(0).astype(np.uint32))
out = {}; shifts = []; phase = []; ecc = []
for k in range(${cases}):
    rng = np.random.default_rng(100 + k)
    a = ndimage.gaussian_filter(rng.random((${height} + 40, ${width} + 40)), rng.uniform(1.2, 2.2), mode='wrap')
    a = 2e6 * (a - a.min()) / (a.max() - a.min()) + 4e5
    dx, dy = rng.uniform(-1, 1, 2) * (0.1 if k % 3 == 0 else 1 if k % 3 == 1 else 4)
    b = np.fft.ifft2(ndimage.fourier_shift(np.fft.fft2(a), (dy, dx))).real
    noisy = lambda x: crop(x + 0.005 * a.mean() * rng.standard_normal(x.shape))
    out['a%d' % k], out['b%d' % k] = p, q = noisy(a), noisy(b)
    p, q = (x.astype(np.float32) / 1e6 for x in (p, q))
    phase.append(list(cv2.phaseCorrelate(p, q, cv2.createHanningWindow(p.shape[::-1], cv2.CV_32F))[0]))
    warp = np.array([[1, 0, round(dx)], [0, 1, round(dy)]], np.float32)
    warp = cv2.findTransformECC(p, q, warp, cv2.MOTION_TRANSLATION, (cv2.TERM_CRITERIA_EPS | cv2.TERM_CRITERIA_COUNT, 100, 1e-7), None, 5)[1]
    ecc.append([float(warp[0, 2]), float(warp[1, 2])]); shifts.append([dx, dy])
np.savez('pairs.npz', **out)
print(json.dumps({'shifts': shifts, 'phase': phase, 'ecc': ecc}))`)
    const pictures = readNpz(readFileSync(path('pairs.npz')))
    const ours = made.shifts.map((_, k): [number, number] => {
      const { dx, dy, converged } = estimateShift(pictures[`a${k}`]!.data, pictures[`b${k}`]!.data, width, height)
      return converged ? [dx, dy] : [Infinity, Infinity]
    })
    const worst = (found: [number, number][]) => Math.max(...found.flatMap(([dx, dy], k) => [Math.abs(dx - made.shifts[k]![0]), Math.abs(dy - made.shifts[k]![1])]))
    return { motionCases: cases, worstMotionPx: worst(ours), worstPhaseCorrelatePx: worst(made.phase), worstEccPx: worst(made.ecc) }
  })
}

/** Takes by the forward model: sensor noise, 8-bit codes, no codec; integrals from the record, sums by the program. */
export function forwardFigure(): Pick<SolveFigures, 'worstAmplitude' | 'worstPhaseDeg'> {
  const errors = [31, 32, 33].map((seed) => {
    const { input, truth } = renderedTake(seed)
    const { p, q } = solveFrameSet(input)
    const [margin, { width, height }] = [4, input]
    let [real, imaginary, power] = [0, 0, 0]
    for (let y = margin; y < height - margin; y++) {
      for (let x = margin; x < width - margin; x++) {
        const at = y * width + x
        // ∇s·U = −p + jq; the complex factor between found and true is its amplitude and phase error.
        const [trueReal, trueImaginary] = [-truth.p[at]!, truth.q[at]!]
        real += -p[at]! * trueReal + q[at]! * trueImaginary
        imaginary += q[at]! * trueReal + p[at]! * trueImaginary
        power += trueReal ** 2 + trueImaginary ** 2
      }
    }
    // Sums count 50000·E.
    return { amplitude: Math.hypot(real, imaginary) / power / 50_000 - 1, phaseDeg: Math.atan2(imaginary, real) * 180 / Math.PI }
  })
  return { worstAmplitude: Math.max(...errors.map(({ amplitude }) => Math.abs(amplitude))), worstPhaseDeg: Math.max(...errors.map(({ phaseDeg }) => Math.abs(phaseDeg))) }
}

function renderedTake(seed: number): { input: FrameSetInput, truth: ReturnType<typeof lineImages> } {
  const frequencyHz = 380 + 7.3 * (seed % 10)
  const regimes = buildSchedule({ startSeconds: 0.2, lines: [{ frequencyHz, repetitions: 3 }], darkSeconds: 0.6, referenceSeconds: 1, phaseSeconds: 1, levelVolts: 1.1, depth: 0.85, phasesDeg: [3, 88], unevenness: 0.05 })
  const scenario = defineScenario({
    seed, width: 96, height: 80, scene: { kind: 'speckle', seed, blurPixels: 1.6, contrast: 0.35 },
    lines: [{ frequencyHz, field: [{ ux: [0.12, 0.05], uy: [-0.04, 0.09] }], forceNewtons: [1, 0] }],
    lamp: { regimes, darkVolts: 0.02 }, camera: { exposureSeconds: 0.018 },
  })
  const timeline = makeTimeline(scenario)
  const groups = groupTruths(scenario, 0.001, 0.0005, timeline).filter(group => group.frameCount > 5)
  const { illumination } = recordSamples(timeline)
  const light = createLightIntegrals(Float32Array.from(illumination), scenario.record.sampleRateHz, scenario.lamp.darkVolts)
  const timing = { ...scenario.clock, exposureSeconds: scenario.camera.exposureSeconds, frameTimesSeconds: Float64Array.from({ length: scenario.camera.frameCount }, (_, frame) => frame * scenario.camera.frameRate.denominator / scenario.camera.frameRate.numerator) }
  const integrals = Float64Array.from(groups.flatMap(({ firstFrame, frameCount }) => {
    const { A, C, S } = exposureIntegrals(light, timing, { frequencyHz, firstFrame, frameCount })
    return [A, C, S]
  }))
  const sums = groups.map(() => new Uint32Array(scenario.width * scenario.height))
  const table = createLightTable(scenario.camera.transfer, scenario.camera.range, scenario.camera.bitDepth)
  let frame = 0
  for (const luma of renderLuma(scenario)) {
    groups.forEach(({ firstFrame, frameCount }, g) => {
      if (frame >= firstFrame && frame < firstFrame + frameCount) addFrame(sums[g]!, luma, table)
    })
    frame++
  }
  return { input: { sums, roles: groups.map(group => group.role), integrals, frames: groups.map(group => group.frameCount), width: scenario.width, height: scenario.height }, truth: lineImages(scenario, 1) }
}
