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

interface Piece extends Required<LampState> {
  start: number
  end: number
}

export function piecesOf(schedule: Schedule): Piece[] {
  const rest = { frequencyHz: 0, phaseDeg: 0, depth: 0, level: schedule.restLevel ?? 0, seconds: Number.POSITIVE_INFINITY }
  let time = schedule.startSeconds ?? 0
  const pieces: Piece[] = [{ ...rest, start: Number.NEGATIVE_INFINITY, end: time }]
  for (const state of schedule.states) {
    pieces.push({ frequencyHz: 0, phaseDeg: 0, depth: 0, ...state, start: time, end: time + state.seconds })
    time += state.seconds
  }
  pieces.push({ ...rest, start: time, end: Number.POSITIVE_INFINITY })
  return pieces
}

export function lampAt(pieces: Piece[], time: number): number {
  const piece = pieces.find(entry => time < entry.end)!
  return piece.level * (1 + piece.depth * Math.sin(2 * Math.PI * piece.frequencyHz * time + piece.phaseDeg * Math.PI / 180))
}

export function scheduleEnd(schedule: Schedule): number {
  return (schedule.startSeconds ?? 0) + schedule.states.reduce((sum, state) => sum + state.seconds, 0)
}

export interface RecordOptions {
  sampleRateHz: number
  seconds: number
  noise?: number
  darkOffset?: number
  ripple?: { depth: number, frequencyHz: number }
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
    const piece = pieces[at]
    const light = piece.level * (1 + piece.depth * Math.sin(2 * Math.PI * piece.frequencyHz * time + piece.phaseDeg * Math.PI / 180))
    const ripple = options.ripple ? 1 + options.ripple.depth * Math.sin(2 * Math.PI * options.ripple.frequencyHz * time) : 1
    record[i] = light * ripple + (options.darkOffset ?? 0) + (options.noise ?? 0) * normal()
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
    if (piece.frequencyHz > 0) {
      const omega = 2 * Math.PI * piece.frequencyHz
      const phase = piece.phaseDeg * Math.PI / 180
      sum += piece.level * piece.depth * (Math.cos(omega * a + phase) - Math.cos(omega * b + phase)) / omega
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
