import { buildSchedule, defineScenario, frameIntegrals, makeTimeline, type RegimeSpec, type Timeline } from '../forward'
import { gaussianRandom, seededRandom } from '../forward/random'
import { photodiode } from '../forward/record'

/** A take as camera and recorder would have it, by the forward model: frame means only, no pictures. */
export interface Take {
  timeline: Timeline
  frameRateHz: number
  exposureSeconds: number
  offsetSeconds: number
  driftPpm: number
  frameTimesSeconds: Float64Array
  frameLight: Float64Array
  illumination: Float32Array
  sampleRateHz: number
  /** Frames from one key frame to the next. */
  keyframeInterval: number
}

export interface TakeOptions {
  /** Length that clip and record share, seconds. */
  seconds: [number, number]
  /** Instants of the scene, counted in frames, at which each frame of the clip was exposed; 0, 1, 2, … when left out. */
  exposedAt?: (frame: number) => number
  /** Frames to be made when `exposedAt` leaves some out. */
  change?: Partial<{ frameRateHz: number, exposureShare: number, offsetSeconds: number, driftPpm: number, sampleRateHz: number, seconds: number, lightNoise: number }>
}

const frameRates = [[25, 1], [30_000, 1001], [30, 1], [48, 1], [50, 1], [60_000, 1001], [60, 1]] as const

/** A take drawn by a seed: several lines, equal or unequal levels, offset in ±30 s, drift in ±200 ppm, full exposure or dead time. */
export function drawTake(seed: number, options: TakeOptions): Take {
  const uniform = seededRandom(seed * 7919 + 13)
  const between = (low: number, high: number) => low + (high - low) * uniform()
  const pick = <T>(list: readonly T[]) => list[Math.floor(uniform() * list.length)]!
  const { change = {} } = options
  const [numerator, denominator] = pick(frameRates)
  const frameRateHz = change.frameRateHz ?? numerator / denominator
  const exposureSeconds = (change.exposureShare ?? pick([1, 1, 0.9, 5 / 6, 0.5])) / frameRateHz
  const offsetSeconds = change.offsetSeconds ?? between(-30, 30)
  const driftPpm = change.driftPpm ?? between(-200, 200)
  const shared = change.seconds ?? between(...options.seconds)
  const clipSeconds = shared + Math.max(0, -offsetSeconds)
  const frameCount = Math.ceil(clipSeconds * frameRateHz)
  const recordSeconds = offsetSeconds + clipSeconds + between(0.5, 4)
  const regimes = drawLamp(uniform, offsetSeconds, recordSeconds)
  const scenario = defineScenario({
    seed: seed + 1, width: 4, height: 4,
    lines: [{ frequencyHz: 100, field: [], forceNewtons: [1, 0] }],
    lamp: { regimes, darkVolts: pick([0, 0.02]), settlingSeconds: pick([0, 0.001, 0.01]) },
    clock: { offsetSeconds, driftPpm },
    camera: { frameRate: { numerator: Math.round(frameRateHz * 1001), denominator: 1001 }, frameCount, exposureSeconds },
    record: { durationSeconds: recordSeconds, sampleRateHz: change.sampleRateHz ?? pick([5000, 10_000]), lampNoiseVolts: between(0, 0.01), mainsVolts: uniform() < 0.3 ? 0.005 : 0, mainsHz: 50 },
  })
  return expose(makeTimeline(scenario), {
    seed, lightNoise: change.lightNoise ?? between(0.0005, 0.002), keyframeInterval: pick([12, 25, 30, 50, 60, 125, 250]),
    exposedAt: options.exposedAt ?? (frame => frame),
  })
}

/** Lines one after another until the record ends, beginning about when the clip does. */
function drawLamp(uniform: () => number, offsetSeconds: number, recordSeconds: number): RegimeSpec[] {
  const between = (low: number, high: number) => low + (high - low) * uniform()
  const seconds = between(1.5, 4)
  const equalLevels = uniform() < 0.5
  const darkBetweenRepetitions = uniform() < 0.3
  const unevenness = between(0.02, 0.2)
  const depth = between(0.6, 0.98)
  const darkSeconds = between(0.4, 1.5)
  const all: RegimeSpec[] = []
  let now = Math.max(offsetSeconds, 0) + between(-1, 3)
  for (let line = 1; now < recordSeconds; line++) {
    const block = buildSchedule({
      startSeconds: now, lines: [{ frequencyHz: Math.round(100 * between(20, 25 + 500 * uniform())) / 100, repetitions: 1 + Math.floor(3 * uniform()) }],
      darkSeconds: darkSeconds * between(0.8, 1.2), referenceSeconds: seconds, phaseSeconds: seconds * between(0.9, 1.3),
      levelVolts: equalLevels ? 1 : between(0.5, 1), depth, unevenness, darkBetweenRepetitions,
    })
    all.push(...block)
    now = block.at(-1)!.endSeconds
  }
  if (!equalLevels) for (const regime of all) if (regime.kind === 'phase') regime.levelVolts *= 0.97
  return all
}

function expose(timeline: Timeline, how: { seed: number, lightNoise: number, keyframeInterval: number, exposedAt: (frame: number) => number }): Take {
  const { scenario } = timeline
  const { camera, record, clock } = scenario
  const normal = gaussianRandom(how.seed + 5)
  const frameRateHz = camera.frameRate.numerator / camera.frameRate.denominator
  const frameTimesSeconds = Float64Array.from({ length: camera.frameCount }, (_, frame) => frame / frameRateHz)
  const frameLight = frameTimesSeconds.map((_, frame) => camera.blackLight + camera.lightPerVolt * (frameIntegrals(timeline, how.exposedAt(frame), 0).a + how.lightNoise * normal()))
  const illumination = new Float32Array(Math.round(record.durationSeconds * record.sampleRateHz))
  for (let i = 0; i < illumination.length; i++) illumination[i] = photodiode(timeline, i / record.sampleRateHz) + record.lampNoiseVolts * normal()
  return {
    timeline, frameRateHz, exposureSeconds: camera.exposureSeconds, offsetSeconds: clock.offsetSeconds, driftPpm: clock.driftPpm,
    frameTimesSeconds, frameLight, illumination, sampleRateHz: record.sampleRateHz, keyframeInterval: how.keyframeInterval,
  }
}
