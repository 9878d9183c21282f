import type { RegimeSpec } from './scenario'

export interface ScheduleOptions {
  /** Record time at which the first regime starts. */
  startSeconds: number
  lines: { frequencyHz: number, repetitions: number }[]
  darkSeconds: number
  referenceSeconds: number
  phaseSeconds: number
  levelVolts: number
  depth: number
  phasesDeg?: number[]
  /** Nobody hits a duration exactly: each is lengthened by up to this share, by a fixed pattern. */
  unevenness?: number
  /** Darks between repetitions too, not only around each line. */
  darkBetweenRepetitions?: boolean
}

/** The ordinary order of a laboratory: dark, then reference and phases for each repetition, dark after each line. */
export function buildSchedule(options: ScheduleOptions): RegimeSpec[] {
  const { phasesDeg = [0, 90], unevenness = 0, darkBetweenRepetitions = false } = options
  const regimes: RegimeSpec[] = []
  let now = options.startSeconds
  const push = (seconds: number, regime: Omit<RegimeSpec, 'startSeconds' | 'endSeconds'>) => {
    const uneven = seconds * (1 + unevenness * ((regimes.length * 0.618034) % 1))
    regimes.push({ ...regime, startSeconds: now, endSeconds: now + uneven })
    now += uneven
  }
  options.lines.forEach(({ frequencyHz, repetitions }, index) => {
    const line = index + 1
    push(options.darkSeconds, { kind: 'dark', line, repetition: 1, levelVolts: 0 })
    for (let repetition = 1; repetition <= repetitions; repetition++) {
      if (darkBetweenRepetitions && repetition > 1) push(options.darkSeconds, { kind: 'dark', line, repetition, levelVolts: 0 })
      push(options.referenceSeconds, { kind: 'reference', line, repetition, levelVolts: options.levelVolts })
      for (const phaseDeg of phasesDeg) push(options.phaseSeconds, { kind: 'phase', line, repetition, levelVolts: options.levelVolts, frequencyHz, depth: options.depth, phaseDeg })
    }
  })
  push(options.darkSeconds, { kind: 'dark', line: null, repetition: null, levelVolts: 0 })
  return regimes
}
