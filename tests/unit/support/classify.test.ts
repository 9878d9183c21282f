import { describe, expect, it } from 'vitest'
import { buildSchedule, classifyFrames, defineScenario, groupFits, groupTruths, type RegimeSpec } from '../../support/forward'

const regimes = buildSchedule({ startSeconds: 0.31, lines: [{ frequencyHz: 187.3, repetitions: 2 }, { frequencyHz: 342, repetitions: 1 }], darkSeconds: 0.3, referenceSeconds: 0.6, phaseSeconds: 0.7, levelVolts: 2, depth: 0.9, unevenness: 0.1 })
const lines = [187.3, 342].map(frequencyHz => ({ frequencyHz, forceNewtons: [1, 0] as const, field: [] }))
type Clock = readonly [offsetSeconds: number, driftPpm: number, recordSeconds: number]
const clocks: Clock[] = [[0.1, 0, 8.5], [-0.83, 25, 8.5], [0.0123, -4000, 4.4]]
const scenarioOf = ([offsetSeconds, driftPpm, recordSeconds]: Clock) => defineScenario({
  lines, lamp: { regimes }, clock: { offsetSeconds, driftPpm }, camera: { frameCount: 400, exposureSeconds: 0.019 }, record: { durationSeconds: recordSeconds },
})

/** Looks at many instants of a frame's exposure, stretched by the guard, and asks which regime each lies in. */
function lookAtInstants(frame: number, [offset, drift, recordSeconds]: Clock, guard: number): string {
  const at = (clip: number) => offset + clip * (1 + drift / 1e6)
  const [from, to] = [at(frame / 50), at(frame / 50 + 0.019)]
  if (from < 0 || to > recordSeconds) return 'outside'
  const nameOf = (t: number, spec = regimes.find((regime: RegimeSpec) => t >= regime.startSeconds && t < regime.endSeconds)) =>
    t < 0 || t > recordSeconds ? 'no record' : spec && spec.kind !== 'dark' ? `${spec.kind} ${spec.line} ${spec.repetition} ${spec.phaseDeg}` : 'dark'
  const seen = new Set<string>()
  for (let i = 0; i <= 500; i++) seen.add(nameOf(from - guard + (to - from + 2 * guard) * i / 500))
  return seen.size === 1 ? [...seen][0]!.split(' ')[0]! : 'edge'
}

describe('truth about frames', () => {
  it.each(clocks)('agrees with looking at every instant of each exposure: offset %s s, drift %s ppm, record of %s s', (...clock) => {
    for (const guard of [0, 0.001, 0.004]) {
      const kinds = classifyFrames(scenarioOf(clock), guard).map(({ kind }) => kind)
      expect(kinds).toEqual(kinds.map((_, frame) => lookAtInstants(frame, clock, guard)))
      expect(new Set(kinds).size).toBeGreaterThan(3)
    }
  })

  it('puts exactly the frames of each class into groups', () => {
    for (const clock of clocks) {
      const scenario = scenarioOf(clock)
      const frames = classifyFrames(scenario)
      const grouped = new Map<number, number>()
      for (const group of groupTruths(scenario)) for (let i = 0; i < group.frameCount; i++) grouped.set(group.firstFrame + i, group.regime)
      expect(frames.map(({ regime }) => regime)).toEqual(frames.map(({ frame }) => grouped.get(frame) ?? null))
    }
  })

  it('names line, repetition, role and phase in the order of the schedule', () => {
    const names = groupTruths(scenarioOf(clocks[0]!)).filter(({ role }) => role !== 'dark').map(group => [group.line, group.repetition, group.role, group.lampPhaseDeg])
    expect(names).toEqual([1, 2, 3].flatMap((take) => {
      const [line, repetition] = take < 3 ? [1, take] : [2, 1]
      return [[line, repetition, 'reference', null], [line, repetition, 'phase', 0], [line, repetition, 'phase', 90]]
    }))
  })

  it('allows a cut to leave out a tenth of the frames and none to reach over an edge', () => {
    for (const group of groupTruths(scenarioOf(clocks[0]!))) {
      expect(groupFits(group, group.firstFrame, group.frameCount)).toBe(true)
      const fewest = Math.ceil(0.9 * group.frameCount)
      expect(groupFits(group, group.firstFrame + group.frameCount - fewest, fewest)).toBe(true)
      expect(groupFits(group, group.firstFrame, Math.floor(0.9 * (group.frameCount - 1)) - 1)).toBe(false)
      expect(groupFits(group, group.firstFrame - 2, group.frameCount)).toBe(false)
      expect(groupFits(group, group.firstFrame + 2, group.frameCount)).toBe(false)
    }
  })

  it('allows both choices for a frame that ends within the slack of a guard', () => {
    // Frame 9 ends at 0.2 s; the regime ends 1.2 ms later, so with a guard of 1 ms and 0.5 ms of slack it may be in or out.
    const near: RegimeSpec[] = [{ kind: 'reference', line: 1, repetition: 1, startSeconds: 0, endSeconds: 0.2012, levelVolts: 2 }]
    const group = groupTruths(defineScenario({ lines, lamp: { regimes: near }, clock: { offsetSeconds: 0, driftPpm: 0 }, record: { durationSeconds: 2 }, camera: { frameCount: 50 } })).find(({ role }) => role === 'reference')!
    expect(group.allowed.lastFrame.max).toBe(9)
    expect(groupFits(group, 1, 9)).toBe(true)
    expect(groupFits(group, 1, 8)).toBe(true)
  })
})
