import type { Flag, Group, PlanLine, Regime } from '../../shared/measurement'
import { withoutExcluded, type ExcludedFrames } from './cutExcluded'
import { frameLossFlag, groupFlags, planFlags, repetitionFlags } from './cutFlags'
import { assignLines } from './cutLines'
import { findEarlier, keepSlackSeconds, stillRight } from './cutKeep'
import { splitLong } from './cutLong'
import { nameGroups } from './cutNames'
import { placeRegimes, type Placed } from './cutRepetitions'
import { framesInside, type FrameSpan } from './cutSpans'
import { chooseWholePeriods, type PeriodChoice } from './wholePeriods'

export { framesInside } from './cutSpans'

export interface CutInput {
  regimes: Regime[]
  alignment: { offsetSeconds: number, driftPpm: number }
  /** Clip time of each frame's start of exposure, rising. */
  frameTimesSeconds: ArrayLike<number>
  exposureSeconds: number
  /** Kept free on both sides of a frame's exposure inside its regime, default 0.001 s. */
  guardSeconds?: number
  plan?: PlanLine[]
  /** An earlier cut of the same regimes: its choices are kept where they are still right (`stillRight`), and its ids. */
  keep?: readonly Group[]
  /** Frames whose time is not known; no group holds one. */
  excluded?: readonly ExcludedFrames[]
}

export interface CutResult {
  groups: Group[]
  flags: Flag[]
}

/**
 * Make the cut list: which frames are summed into which group.
 *
 * A frame belongs to a regime when its exposure window, widened by the guard on both sides, lies wholly inside it; all
 * others are left out. Lines, repetitions and roles follow from the regimes (`assignLines`, `placeRegimes`); of every
 * phase group the part, at least 90 % of it, with the least whole-period error is kept (`chooseWholePeriods`). A group that
 * excluded frames divide is its larger side, one too long for an exact sum becomes several; where that is less than half of a lit group, all groups of the repetition are
 * flagged `frame-loss` and not accepted.
 *
 * @returns groups in order of their first frame, ids such as `l1-r2-p90`, `l1-r2-ref`, `l1-r2-dark` (`-2` for a second one
 *   of a kind); `frequencyHz` is the line's measured frequency. Regimes that no frame fits into give a flag, no group.
 */
export function cutFrames(input: CutInput): CutResult {
  const { regimes, alignment, exposureSeconds, plan = [], keep = [] } = input
  const starts = Float64Array.from(input.frameTimesSeconds, time => alignment.offsetSeconds + (1 + alignment.driftPpm * 1e-6) * time)
  const placed = placeRegimes(regimes, assignLines(regimes, plan))
  const flags: Flag[] = []
  const groups: Group[] = []
  const earlier = new Map<Group, Group>()
  const damaged = new Map<string, { line: number, repetition: number }>()
  if (!placed.length) {
    flags.push({ code: 'no-lines', severity: 'problem', message: 'No harmonic lamp was found, so there is nothing to sum; check the illumination channel and the alignment.' })
  }
  for (const place of placed) {
    const regime = regimes[place.index]
    const { group, inside, whole } = makeGroup(input, place, starts)
    if (regime.kind !== 'dark' && inside.count < whole.count / 2) damaged.set(repetitionKey(group), group)
    if (group.frameCount > 0) {
      group.flags = groupFlags(group, regime, exposureSeconds, place.line.planned !== null, plan.length > 0)
      for (const part of splitLong(group)) {
        groups.push(part)
        const match = findEarlier(part, keep)
        if (match) earlier.set(part, match)
      }
    } else if (regime.kind !== 'dark' && whole.count === 0) {
      flags.push(outsideFlag(regime, starts, exposureSeconds))
    }
  }
  groups.sort((a, b) => a.firstFrame - b.firstFrame)
  nameGroups(groups, earlier)
  for (const [key, { line, repetition }] of damaged) flags.push(refuse(groups.filter(group => repetitionKey(group) === key), line, repetition))
  for (const key of new Set(groups.map(repetitionKey))) flags.push(...repetitionFlags(groups.filter(group => repetitionKey(group) === key)))
  flags.push(...planFlags(groups, plan))
  return { groups, flags }
}

function repetitionKey(group: Group): string {
  return `${group.line}/${group.repetition}`
}

function refuse(groups: Group[], line: number, repetition: number): Flag {
  const flag = frameLossFlag(line, repetition)
  for (const group of groups) {
    group.accepted = false
    group.flags.push(flag)
  }
  return flag
}

/** `whole`: the frames inside the regime, `inside`: their larger side when excluded frames divide them. */
function makeGroup(input: CutInput, place: Placed, starts: Float64Array): { group: Group, inside: FrameSpan, whole: FrameSpan } {
  const { exposureSeconds, guardSeconds = 0.001, excluded = [] } = input
  const regime = input.regimes[place.index]
  const { startSeconds, endSeconds } = regime
  const whole = framesInside(starts, exposureSeconds, guardSeconds, startSeconds, endSeconds)
  const inside = withoutExcluded(whole.first, whole.count, excluded)
  const role = regime.kind === 'dark' ? 'dark' : regime.kind === 'constant' ? 'reference' : 'phase'
  const choose = ({ first, count }: FrameSpan, leastShare?: number): PeriodChoice => {
    if (role !== 'phase' || count < 2) return { first: 0, count, error: 0, errorOfAll: 0 }
    return chooseWholePeriods({ startsSeconds: starts.subarray(first, first + count), exposureSeconds, frequencyHz: place.line.frequencyHz, depth: regime.depth ?? 0 }, leastShare)
  }
  // A boundary's error can cost a frame of the regime: nine tenths are left with it too.
  const best = choose(inside, Math.min(1, 0.9 * (1 + 1 / inside.count)))
  const group: Group = {
    id: '', line: place.line.line, frequencyHz: place.line.frequencyHz, repetition: place.repetition, role,
    lampPhaseDeg: regime.lampPhaseDeg, depth: regime.depth, distortion: regime.distortion,
    firstFrame: inside.first + best.first, frameCount: best.count, accepted: true, flags: [],
  }
  const earlier = findEarlier(group, input.keep ?? [])
  if (earlier) {
    const widest = framesInside(starts, exposureSeconds, guardSeconds - keepSlackSeconds(guardSeconds, exposureSeconds), startSeconds, endSeconds)
    const kept = choose({ first: earlier.firstFrame, count: earlier.frameCount }, 1)
    if (stillRight(earlier, widest, inside, excluded, { kept: kept.error, best: best.error })) {
      group.firstFrame = earlier.firstFrame
      group.frameCount = earlier.frameCount
    }
  }
  return { group, inside, whole }
}

function outsideFlag(regime: Regime, starts: Float64Array, exposureSeconds: number): Flag {
  const at = `The ${regime.kind === 'constant' ? 'reference' : 'harmonic'} regime at ${regime.startSeconds.toFixed(2)} s of the record`
  const outside = regime.endSeconds < starts[0] || regime.startSeconds > starts[starts.length - 1] + exposureSeconds
  return outside
    ? { code: 'regime-outside-clip', severity: 'note', message: `${at} was not filmed.` }
    : { code: 'regime-without-frames', severity: 'warning', message: `${at} is too short to hold a whole exposure with its guard.` }
}
