import type { Complex } from './complex'
import type { ModeTerm } from './modeField'
import type { SceneSpec } from './scene'

export interface RegimeSpec {
  kind: 'dark' | 'reference' | 'phase'
  /** Record time; may lie before 0 or after the record's end. */
  startSeconds: number
  endSeconds: number
  /** Line and repetition count from 1; null where nobody asked for one (darks between lines). */
  line: number | null
  repetition: number | null
  /** Mean lamp signal over the dark level, in V on the photodiode. 0 when dark. */
  levelVolts: number
  /** L(t) = level·(1 + depth·sin(2π·frequency·t + phase) + secondHarmonicDepth·sin(2·2π·frequency·t)), t record time. */
  frequencyHz?: number
  depth?: number
  phaseDeg?: number
  secondHarmonicDepth?: number
}

export interface LineSpec {
  frequencyHz: number
  field: ModeTerm[]
  /** Complex force amplitude in N: F(t) = Re{F e^{jωt}}. */
  forceNewtons: Complex
}

/** From `atClipSeconds` on the whole image lies (dx, dy) pixels right and down of where it was at the start. */
export interface Bump { atClipSeconds: number, dxPixels: number, dyPixels: number }

export interface Scenario {
  seed: number
  width: number
  height: number
  millimetresPerPixel: number
  scene: SceneSpec
  lines: LineSpec[]
  lamp: {
    regimes: RegimeSpec[]
    /** What the photodiode says with the lamp off. */
    darkVolts: number
    /** Time constant with which the lamp goes from one regime to the next; 0 is at once. */
    settlingSeconds: number
  }
  /** record time = offsetSeconds + (1 + driftPpm·1e-6)·clip time */
  clock: { offsetSeconds: number, driftPpm: number }
  camera: {
    frameRate: { numerator: number, denominator: number }
    frameCount: number
    exposureSeconds: number
    /** Linear light (1 = nominal white) of a white surface under 1 V of lamp. */
    lightPerVolt: number
    /** Steady light that no photodiode sees, as V of lamp. */
    ambientVolts: number
    /** Linear light that the camera adds everywhere. */
    blackLight: number
    /** Standard deviation of a pixel: √(readNoise² + shotNoise²·E), linear light. */
    readNoise: number
    shotNoise: number
    transfer: 'bt709' | 'srgb' | 'linear' | 'gamma22'
    range: 'limited' | 'full'
    bitDepth: 8 | 10
    bumps: Bump[]
  }
  record: {
    durationSeconds: number
    sampleRateHz: number
    lampNoiseVolts: number
    /** Pick-up in the wiring: on the record, not in the light. */
    mainsVolts: number
    mainsHz: number
    forceNoiseNewtons: number
    accelerationNoise: number
    probe: { x: number, y: number, axis: 'x' | 'y' }
    csv: {
      delimiter: string
      decimalComma: boolean
      timeColumn: boolean
      /** What the time column says at the first sample. */
      firstTimeSeconds: number
      unitsRow: boolean
      channels: ('illumination' | 'force' | 'acceleration')[]
      /** Header names in the order time, illumination, force, acceleration. */
      names: { time: string, illumination: string, force: string, acceleration: string }
    }
  }
  encoding: {
    container: 'mp4' | 'mkv' | 'mov'
    /** Constant rate factor; 'lossless' keeps every code. */
    crf: number | 'lossless'
    preset: string
    /** 'grain' keeps the sensor noise that dithers the codes; without it (null) x264 takes a sixth of the motion at crf 12. */
    tune: string | null
    keyframeInterval: number
    bFrames: number
    /** Whether the stream says its range and transfer. */
    tagged: boolean
    /** Photodiode on the microphone input: `volts` is full scale. */
    audio: null | { codec: 'aac' | 'flac' | 'pcm_s16le', sampleRateHz: number, fullScaleVolts: number }
  }
  /** Harmonics of the line that the rendering keeps; 3 is good to 10⁻⁴ of white at 0.35 px, 6 to 2·10⁻⁵ or better. */
  harmonics: number
}

type Loose<T> = T extends readonly unknown[] ? T : T extends object ? { [K in keyof T]?: Loose<T[K]> } : T
/** A scenario with everything left out that the defaults say well enough. */
export type ScenarioInput = Omit<Loose<Scenario>, 'lines' | 'lamp' | 'scene'> & {
  lines: LineSpec[]
  scene?: SceneSpec
  lamp: { regimes: RegimeSpec[], darkVolts?: number, settlingSeconds?: number }
}

/** Fills in defaults: a 50 frames/s camera with an open shutter, a record that runs as long as the lamp does. */
export function defineScenario(input: ScenarioInput): Scenario {
  const lastEnd = Math.max(0, ...input.lamp.regimes.map(regime => regime.endSeconds))
  const frameRate = { numerator: 50, denominator: 1, ...input.camera?.frameRate }
  const width = input.width ?? 192
  const height = input.height ?? 128
  const clock = { offsetSeconds: 0, driftPpm: 0, ...input.clock }
  const recordSeconds = input.record?.durationSeconds ?? lastEnd
  return {
    seed: 1, width, height, millimetresPerPixel: 0.1, harmonics: 3, ...input, clock,
    scene: input.scene ?? { kind: 'speckle', seed: 11, blurPixels: 1.6, contrast: 0.35 },
    lamp: { darkVolts: 0, settlingSeconds: 0, ...input.lamp },
    camera: {
      frameCount: Math.max(1, Math.floor((lastEnd - clock.offsetSeconds) * frameRate.numerator / frameRate.denominator)),
      exposureSeconds: frameRate.denominator / frameRate.numerator,
      lightPerVolt: 0.4, ambientVolts: 0, blackLight: 0.015, readNoise: 0.002, shotNoise: 0.006,
      transfer: 'bt709', range: 'limited', bitDepth: 8, bumps: [],
      ...input.camera, frameRate,
    },
    record: {
      sampleRateHz: 10_000, lampNoiseVolts: 0.002, mainsVolts: 0, mainsHz: 50, forceNoiseNewtons: 0.01, accelerationNoise: 0.01,
      ...input.record, durationSeconds: recordSeconds,
      probe: { x: Math.round(width / 4), y: Math.round(height / 4), axis: 'x', ...input.record?.probe },
      csv: {
        delimiter: ',', decimalComma: false, timeColumn: true, firstTimeSeconds: 0, unitsRow: false, channels: ['illumination', 'force', 'acceleration'],
        ...input.record?.csv, names: { time: 'time', illumination: 'illumination', force: 'force', acceleration: 'acceleration', ...input.record?.csv?.names },
      },
    },
    encoding: { container: 'mp4', crf: 10, preset: 'veryfast', tune: 'grain', keyframeInterval: 50, bFrames: 0, tagged: true, audio: null, ...input.encoding } as Scenario['encoding'],
  }
}
