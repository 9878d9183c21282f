import { describe, expect, it } from 'vitest'
import { alignClip } from '../../../jobs/signal/align'
import { cutFrames, framesInside } from '../../../jobs/signal/cut'
import { findRegimes } from '../../../jobs/signal/regimes'
import { chooseWholePeriods } from '../../../jobs/signal/wholePeriods'
import type { Regime } from '../../../shared/measurement'
import { makeClip, makeRecord, piecesOf, scheduleEnd, seededUniform, usualSchedule, type ClipOptions, type Schedule } from './synthetic'

const frameTimesSeconds = Float64Array.from({ length: 2000 }, (_, k) => k / 50)
const exposureSeconds = 1 / 50
const still = { offsetSeconds: 0, driftPpm: 0 }

/** Regimes one after another; numbers are phases of a 200.3 Hz lamp, or [frequency, phase]. */
function regimesOf(kinds: ('dark' | 'ref' | number | [number, number])[], seconds = 1.013): Regime[] {
  return kinds.map((kind, k) => {
    const [frequencyHz, lampPhaseDeg] = typeof kind === 'number' ? [200.3, kind] : typeof kind === 'string' ? [null, null] : kind
    return {
      kind: kind === 'dark' ? 'dark' : kind === 'ref' ? 'constant' : 'harmonic',
      startSeconds: k * seconds, endSeconds: (k + 1) * seconds, level: kind === 'dark' ? 0 : 1,
      frequencyHz, lampPhaseDeg, depth: frequencyHz === null ? null : 0.9, distortion: frequencyHz === null ? null : 0.01, flags: [],
    }
  })
}

const idsOf = (regimes: Regime[], plan?: { frequencyHz: number, repetitions?: number }[]) =>
  cutFrames({ regimes, alignment: still, frameTimesSeconds, exposureSeconds, plan }).groups.map(group => group.id)
const codesOf = (regimes: Regime[], plan?: { frequencyHz: number, repetitions?: number }[]) =>
  cutFrames({ regimes, alignment: still, frameTimesSeconds, exposureSeconds, plan }).flags.map(flag => flag.code)

describe('frames inside a regime', () => {
  it('are those whose exposure and guard lie wholly inside, to the last one', () => {
    const starts = frameTimesSeconds
    for (const [from, to, guard] of [[0.5, 1.5, 0.001], [0.501, 1.4999, 0.001], [0.4999, 1.52, 0], [0, 0.019, 0], [39.9, 50, 0.001]]) {
      const expected = [...starts.keys()].filter(k => starts[k] - guard >= from && starts[k] + exposureSeconds + guard <= to)
      const { first, count } = framesInside(starts, exposureSeconds, guard, from, to)
      expect(Array.from({ length: count }, (_, k) => first + k)).toEqual(expected)
    }
  })
})

describe('lines and repetitions', () => {
  it('reference, sine, cosine, again and again', () => {
    expect(idsOf(regimesOf(['ref', 0, 90, 'ref', 0, 90]))).toEqual(['l1-r1-ref', 'l1-r1-p0', 'l1-r1-p90', 'l1-r2-ref', 'l1-r2-p0', 'l1-r2-p90'])
  })

  it('gives dark to the repetition that follows, a last dark and a last reference to the last one', () => {
    expect(idsOf(regimesOf(['dark', 'ref', 0, 90, 'dark', 'ref', 0, 90, 'ref', 'dark'])))
      .toEqual(['l1-r1-dark', 'l1-r1-ref', 'l1-r1-p0', 'l1-r1-p90', 'l1-r2-dark', 'l1-r2-ref', 'l1-r2-p0', 'l1-r2-p90', 'l1-r2-ref-2', 'l1-r2-dark-2'])
  })

  it('understands references that come after their phases', () => {
    expect(idsOf(regimesOf([0, 90, 'ref', 0, 90, 'ref']))).toEqual(['l1-r1-p0', 'l1-r1-p90', 'l1-r1-ref', 'l1-r2-p0', 'l1-r2-p90', 'l1-r2-ref'])
  })

  it('begins a repetition where a phase comes again without a reference, and says that one is missing', () => {
    const regimes = regimesOf(['ref', 0, 90, 0, 90])
    expect(idsOf(regimes)).toEqual(['l1-r1-ref', 'l1-r1-p0', 'l1-r1-p90', 'l1-r2-p0', 'l1-r2-p90'])
    expect(codesOf(regimes)).toEqual(['reference-missing'])
  })

  it('numbers lines in order of appearance, in the plan\'s order when there is one, unplanned ones after it', () => {
    const regimes = regimesOf(['ref', [300.02, 0], [300.02, 90], 'ref', [120, 0], [120, 90], 'ref', [77, 0], [77, 90]])
    expect(idsOf(regimes).filter(id => id.endsWith('p0'))).toEqual(['l1-r1-p0', 'l2-r1-p0', 'l3-r1-p0'])
    const plan = [{ frequencyHz: 120 }, { frequencyHz: 300 }]
    expect(idsOf(regimes, plan).filter(id => id.endsWith('p0'))).toEqual(['l2-r1-p0', 'l1-r1-p0', 'l3-r1-p0'])
    const { groups } = cutFrames({ regimes, alignment: still, frameTimesSeconds, exposureSeconds, plan })
    expect(groups.filter(group => group.flags.some(flag => flag.code === 'unplanned-line')).map(group => group.id)).toEqual(['l3-r1-p0', 'l3-r1-p90'])
    expect(groups[0].frequencyHz).toBe(300.02)
  })

  it('keeps planned lines 1 Hz apart from one another', () => {
    const regimes = regimesOf(['ref', [150.1, 0], [150.1, 90], 'ref', [150.9, 0], [150.9, 90]])
    expect(idsOf(regimes, [{ frequencyHz: 151 }, { frequencyHz: 150 }]).filter(id => id.endsWith('ref'))).toEqual(['l2-r1-ref', 'l1-r1-ref'])
  })

  it('says which planned line and repetition is missing', () => {
    expect(codesOf(regimesOf(['ref', 0, 90]), [{ frequencyHz: 200, repetitions: 2 }, { frequencyHz: 400 }])).toEqual(['repetition-missing', 'line-missing'])
  })

  it('flags a quarter that is none, a lonely phase, a shallow lamp, a regime without frames, a record without harmonic lamp', () => {
    expect(codesOf(regimesOf(['ref', 0, 70]))).toEqual(['quarter-off'])
    expect(codesOf(regimesOf(['ref', 0, 94]))).toEqual([])
    expect(codesOf(regimesOf(['ref', 90]))).toEqual(['phase-missing'])
    const shallow = regimesOf(['ref', 0, 90])
    shallow[1].depth = 0.3
    expect(cutFrames({ regimes: shallow, alignment: still, frameTimesSeconds, exposureSeconds }).groups[1].flags.map(flag => flag.code)).toEqual(['depth-shallow'])
    expect(codesOf(regimesOf(['ref', 0, 90], 0.02))).toContain('regime-without-frames')
    expect(codesOf(regimesOf(['dark', 'ref']))).toEqual(['no-lines'])
  })

  it('names phases by quarters, also below 0°', () => {
    expect(idsOf(regimesOf(['ref', -88, 179.4]))).toEqual(['l1-r1-ref', 'l1-r1-p270', 'l1-r1-p180'])
  })
})

describe('whole periods', () => {
  it('equal the exhaustive choice, dead time included, and keep 90 % of the frames', () => {
    const run = { startsSeconds: Float64Array.from({ length: 60 }, (_, k) => 0.3 + k / 50), exposureSeconds: 1 / 60, frequencyHz: 206.1, depth: 0.9 }
    const leak = (first: number, count: number, hz: number) => {
      let re = 0, im = 0
      for (let k = first; k < first + count; k++) {
        const a = 2 * Math.PI * hz * run.startsSeconds[k]
        const b = a + 2 * Math.PI * hz * run.exposureSeconds
        re += (Math.sin(b) - Math.sin(a)) / (b - a)
        im += (Math.cos(a) - Math.cos(b)) / (b - a)
      }
      return Math.hypot(re, im) / count
    }
    const error = (first: number, count: number) => leak(first, count, run.frequencyHz) + run.depth / 2 * leak(first, count, 2 * run.frequencyHz)
    let least = Number.POSITIVE_INFINITY
    for (let count = 54; count <= 60; count++) for (let first = 0; first + count <= 60; first++) least = Math.min(least, error(first, count))
    const choice = chooseWholePeriods(run)
    expect(choice.count).toBeGreaterThanOrEqual(54)
    expect(error(choice.first, choice.count)).toBeCloseTo(least, 10)
    expect(choice.error).toBeCloseTo(least, 10)
    expect(choice.errorOfAll).toBeCloseTo(error(0, 60), 10)
    expect(choice.error).toBeLessThan(choice.errorOfAll)
  })

  it('drop no frame when every exposure holds whole periods', () => {
    const run = { startsSeconds: Float64Array.from({ length: 50 }, (_, k) => k / 50), exposureSeconds: 1 / 50, frequencyHz: 200, depth: 1 }
    expect(chooseWholePeriods(run)).toMatchObject({ first: 0, count: 50 })
  })

  it('of gap-free exposures leave the Dirichlet kernel\'s leakage', () => {
    // ∫ e^{jωt} over n/50 s: |sin(π f T) / (π f T)|.
    const run = { startsSeconds: Float64Array.from({ length: 10 }, (_, k) => k / 50), exposureSeconds: 1 / 50, frequencyHz: 52, depth: 0 }
    const x = Math.PI * 52 * 0.2
    expect(chooseWholePeriods(run, 1).error).toBeCloseTo(Math.abs(Math.sin(x) / x), 10)
  })
})

describe('from record and clip to the cut list', () => {
  /** Truth: every frame's state, null when its exposure (no guard) crosses a boundary. */
  function check(schedule: Schedule, clip: ClipOptions, sampleRateHz: number, noise: number) {
    const illumination = makeRecord(schedule, { sampleRateHz, seconds: scheduleEnd(schedule) + 0.7, noise, darkOffset: 0.01 })
    const { frameLight, frameTimesSeconds } = makeClip(schedule, clip)
    const { regimes, darkLevel } = findRegimes(illumination, sampleRateHz)
    const alignment = alignClip({ frameLight, frameTimesSeconds, exposureSeconds: clip.exposureSeconds, illumination, sampleRateHz, darkLevel })
    const { groups, flags } = cutFrames({ regimes, alignment, frameTimesSeconds, exposureSeconds: clip.exposureSeconds })
    const pieces = piecesOf(schedule)
    const stateOf = (frame: number, guard: number) => {
      const start = clip.offsetSeconds + (1 + (clip.driftPpm ?? 0) * 1e-6) * frameTimesSeconds[frame]
      return pieces.find(piece => start - guard >= piece.start && start + clip.exposureSeconds + guard <= piece.end) ?? null
    }
    let wrong = 0
    const homes = groups.map((group) => {
      const states = Array.from({ length: group.frameCount }, (_, k) => stateOf(group.firstFrame + k, 0))
      const dark = states.every(state => state === null || state.level === 0)
      const home = states[Math.floor(states.length / 2)]!
      if (!dark) wrong += states.filter(state => state !== home).length
      return home
    })
    const lit = pieces.filter(piece => piece.level > 0)
    for (const piece of lit) {
      const inside = [...frameTimesSeconds.keys()].filter(frame => stateOf(frame, 0.0015) === piece).length
      const group = groups[homes.indexOf(piece)]
      expect(group.frameCount).toBeGreaterThanOrEqual(piece.frequencyHz > 0 ? Math.floor(0.9 * inside) : inside)
      expect(group.role).toBe(piece.frequencyHz > 0 ? 'phase' : 'reference')
    }
    return { wrong, groups, flags, lit }
  }

  it('10 seeded shots: no frame in a wrong group, no edge frame used, all repetitions found', () => {
    const uniform = seededUniform(77)
    for (let k = 0; k < 10; k++) {
      const frameRateHz = [25, 30_000 / 1001, 50, 60][k % 4]
      const schedule = usualSchedule({
        frequenciesHz: [60 + 300 * uniform(), 500 + 300 * uniform()].slice(0, 1 + k % 2), repetitions: 2, seconds: 0.9 + uniform(), darkSeconds: k % 3 ? 0.4 : 0,
        startSeconds: 0.5, jitter: () => 0.1 * uniform(), depth: 0.6 + 0.4 * uniform(),
      })
      const clip = { frameRateHz, exposureSeconds: (k % 2 ? 1 : 0.8) / frameRateHz, frameCount: Math.floor(scheduleEnd(schedule) * frameRateHz), offsetSeconds: 0.3 * uniform(), driftPpm: 200 * (uniform() - 0.5), noise: 0.002 }
      const { wrong, groups, flags, lit } = check(schedule, clip, k % 2 ? 10_000 : 5000, 0.01)
      expect(wrong).toBe(0)
      expect(flags).toEqual([])
      expect(groups.filter(group => group.role !== 'dark').map(group => group.id)).toEqual(
        lit.map((piece, n) => `l${1 + Math.floor(n / 6)}-r${1 + Math.floor(n / 3) % 2}-${piece.frequencyHz > 0 ? `p${piece.phaseDeg}` : 'ref'}`))
    }
  }, 120_000)

  it('a clip of 6 s at 25 frames/s with regimes of 0.6 s', () => {
    const schedule = usualSchedule({ frequenciesHz: [180.3], repetitions: 2, seconds: 0.6, darkSeconds: 0.5, startSeconds: 0.2 })
    const { wrong, groups } = check(schedule, { frameRateHz: 25, exposureSeconds: 1 / 25, frameCount: 130, offsetSeconds: 0.111, driftPpm: -30, noise: 0.003 }, 5000, 0.01)
    expect(wrong).toBe(0)
    expect(groups.map(group => group.id)).toEqual(['l1-r1-dark', 'l1-r1-ref', 'l1-r1-p0', 'l1-r1-p90', 'l1-r2-ref', 'l1-r2-p0', 'l1-r2-p90', 'l1-r2-dark'])
  })
})
