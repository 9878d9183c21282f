/** Small seeded truth for the signal tests: a lamp schedule in closed form, sampled as a record, integrated as frames. */

export interface LampState {
  seconds: number
  level: number
  frequencyHz?: number
  phaseDeg?: number
  depth?: number
}

export interface Schedule {
  states: LampState[]
  /** Record time at which the first state begins; before it and after the last the lamp has `restLevel`. */
  startSeconds?: number
  restLevel?: number
  /** Mains ripple that multiplies the light of every state, so record and frames both see it. */
  ripple?: { depth: number, frequencyHz: number }
}

/** mulberry32: uniform in [0, 1). */
export function seededUniform(seed: number): () => number {
  let state = seed >>> 0
  return () => {
    state = (state + 0x6D2B79F5) >>> 0
    let t = state
    t = Math.imul(t ^ (t >>> 15), t | 1)
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61)
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296
  }
}

/** Standard normal numbers by Box and Muller. */
export function seededNormal(seed: number): () => number {
  const uniform = seededUniform(seed)
  return () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform())
}

interface Tone {
  amplitude: number
  frequencyHz: number
  phase: number
}

export interface Piece extends Required<LampState> {
  start: number
  end: number
  /** The light is level + Σ amplitude·sin(2πft + phase). */
  tones: Tone[]
}

function tonesOf(state: Required<LampState>, ripple: Schedule['ripple']): Tone[] {
  const { level, depth, frequencyHz } = state
  const phase = state.phaseDeg * Math.PI / 180
  const tones: Tone[] = depth > 0 ? [{ amplitude: level * depth, frequencyHz, phase }] : []
  if (!ripple) return tones
  // sin a · sin b = ½ cos(a − b) − ½ cos(a + b)
  tones.push({ amplitude: level * ripple.depth, frequencyHz: ripple.frequencyHz, phase: 0 })
  const product = level * depth * ripple.depth / 2
  if (depth > 0) {
    tones.push({ amplitude: product, frequencyHz: frequencyHz - ripple.frequencyHz, phase: phase + Math.PI / 2 })
    tones.push({ amplitude: -product, frequencyHz: frequencyHz + ripple.frequencyHz, phase: phase + Math.PI / 2 })
  }
  return tones
}

export function piecesOf(schedule: Schedule): Piece[] {
  const rest = { frequencyHz: 0, phaseDeg: 0, depth: 0, level: schedule.restLevel ?? 0, seconds: Number.POSITIVE_INFINITY }
  let time = schedule.startSeconds ?? 0
  const piece = (state: Required<LampState>, start: number, end: number): Piece => ({ ...state, start, end, tones: tonesOf(state, schedule.ripple) })
  const pieces: Piece[] = [piece(rest, Number.NEGATIVE_INFINITY, time)]
  for (const state of schedule.states) {
    pieces.push(piece({ frequencyHz: 0, phaseDeg: 0, depth: 0, ...state }, time, time + state.seconds))
    time += state.seconds
  }
  pieces.push(piece(rest, time, Number.POSITIVE_INFINITY))
  return pieces
}

function lightOf(piece: Piece, time: number): number {
  return piece.tones.reduce((sum, tone) => sum + tone.amplitude * Math.sin(2 * Math.PI * tone.frequencyHz * time + tone.phase), piece.level)
}

export function scheduleEnd(schedule: Schedule): number {
  return (schedule.startSeconds ?? 0) + schedule.states.reduce((sum, state) => sum + state.seconds, 0)
}

export interface RecordOptions {
  sampleRateHz: number
  seconds: number
  noise?: number
  darkOffset?: number
  seed?: number
}

export function makeRecord(schedule: Schedule, options: RecordOptions): Float32Array {
  const pieces = piecesOf(schedule)
  const normal = seededNormal(options.seed ?? 1)
  const record = new Float32Array(Math.round(options.seconds * options.sampleRateHz))
  let at = 0
  for (let i = 0; i < record.length; i++) {
    const time = i / options.sampleRateHz
    while (time >= pieces[at].end) at++
    record[i] = lightOf(pieces[at], time) + (options.darkOffset ?? 0) + (options.noise ?? 0) * normal()
  }
  return record
}

/** Exact integral of the lamp over [from, to]. */
export function lampIntegral(pieces: Piece[], from: number, to: number): number {
  let sum = 0
  for (const piece of pieces) {
    const a = Math.max(from, piece.start)
    const b = Math.min(to, piece.end)
    if (b <= a) continue
    sum += piece.level * (b - a)
    for (const { amplitude, frequencyHz, phase } of piece.tones) {
      const omega = 2 * Math.PI * frequencyHz
      sum += omega === 0 ? amplitude * Math.sin(phase) * (b - a) : amplitude * (Math.cos(omega * a + phase) - Math.cos(omega * b + phase)) / omega
    }
  }
  return sum
}

export interface ClipOptions {
  frameRateHz: number
  exposureSeconds: number
  frameCount: number
  offsetSeconds: number
  driftPpm?: number
  gain?: number
  background?: number
  /** Standard deviation of a frame's mean, relative to gain × 1. */
  noise?: number
  seed?: number
}

export function makeClip(schedule: Schedule, options: ClipOptions) {
  const pieces = piecesOf(schedule)
  const normal = seededNormal((options.seed ?? 1) + 7919)
  const gain = options.gain ?? 0.6
  const frameTimesSeconds = new Float64Array(options.frameCount)
  const frameLight = new Float64Array(options.frameCount)
  for (let k = 0; k < options.frameCount; k++) {
    frameTimesSeconds[k] = k / options.frameRateHz
    const start = options.offsetSeconds + (1 + (options.driftPpm ?? 0) * 1e-6) * frameTimesSeconds[k]
    const mean = lampIntegral(pieces, start, start + options.exposureSeconds) / options.exposureSeconds
    frameLight[k] = gain * (mean + (options.noise ?? 0) * normal()) + (options.background ?? 0.01)
  }
  return { frameTimesSeconds, frameLight }
}

/** Usual shooting order: per line and repetition reference, sine, cosine, no gaps; dark in front when asked for. */
export function usualSchedule(options: {
  frequenciesHz: number[]
  repetitions: number
  seconds: number
  darkSeconds?: number
  depth?: number
  levels?: number[]
  startSeconds?: number
  jitter?: () => number
}): Schedule {
  const states: LampState[] = []
  options.frequenciesHz.forEach((frequencyHz, line) => {
    const level = options.levels?.[line] ?? 1
    for (let repetition = 0; repetition < options.repetitions; repetition++) {
      const seconds = () => options.seconds + (options.jitter ? options.jitter() : 0)
      if (options.darkSeconds && repetition === 0) states.push({ seconds: options.darkSeconds, level: 0 })
      states.push({ seconds: seconds(), level })
      states.push({ seconds: seconds(), level, frequencyHz, phaseDeg: 0, depth: options.depth ?? 0.9 })
      states.push({ seconds: seconds(), level, frequencyHz, phaseDeg: 90, depth: options.depth ?? 0.9 })
    }
  })
  if (options.darkSeconds) states.push({ seconds: options.darkSeconds, level: 0 })
  return { states, startSeconds: options.startSeconds }
}
