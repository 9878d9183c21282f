import type { Flag, Group, PlanLine, Regime } from '../../shared/measurement'
import { groupFlags, planFlags, repetitionFlags } from './cutFlags'
import { assignLines } from './cutLines'
import { placeRegimes, type Placed } from './cutRepetitions'
import { chooseWholePeriods } from './wholePeriods'

export interface CutInput {
  regimes: Regime[]
  alignment: { offsetSeconds: number, driftPpm: number }
  /** Clip time of each frame's start of exposure, rising. */
  frameTimesSeconds: ArrayLike<number>
  exposureSeconds: number
  /** Kept free on both sides of a frame's exposure inside its regime, default 0.001 s. */
  guardSeconds?: number
  plan?: PlanLine[]
}

export interface CutResult {
  groups: Group[]
  flags: Flag[]
}

/** Frames [first, end) whose exposure plus guard lies wholly inside [start, end] of record time. */
export function framesInside(starts: Float64Array, exposureSeconds: number, guardSeconds: number, startSeconds: number, endSeconds: number): { first: number, count: number } {
  let low = 0
  let high = starts.length
  while (low < high) {
    const middle = (low + high) >> 1
    if (starts[middle] - guardSeconds < startSeconds) low = middle + 1
    else high = middle
  }
  const first = low
  high = starts.length
  while (low < high) {
    const middle = (low + high) >> 1
    if (starts[middle] + exposureSeconds + guardSeconds <= endSeconds) low = middle + 1
    else high = middle
  }
  return { first, count: low - first }
}

/** 90° steps where the lamp keeps them (within 20°), else tens of degrees, in 0…359. */
function phaseName(lampPhaseDeg: number): string {
  const quarter = Math.round(lampPhaseDeg / 90) * 90
  const rounded = Math.abs(lampPhaseDeg - quarter) <= 20 ? quarter : Math.round(lampPhaseDeg / 10) * 10
  return `p${((rounded % 360) + 360) % 360}`
}

function nameGroups(groups: Group[]): void {
  const used = new Map<string, number>()
  for (const group of groups) {
    const part = group.role === 'phase' ? phaseName(group.lampPhaseDeg!) : group.role === 'dark' ? 'dark' : 'ref'
    const id = `l${group.line}-r${group.repetition}-${part}`
    const count = (used.get(id) ?? 0) + 1
    used.set(id, count)
    group.id = count === 1 ? id : `${id}-${count}`
  }
}

/**
 * Make the cut list: which frames are summed into which group.
 *
 * A frame belongs to a regime when its exposure window, widened by the guard on both sides, lies wholly inside it; all
 * others are left out. Lines, repetitions and roles follow from the regimes (`assignLines`, `placeRegimes`); of every
 * phase group the part, at least 90 % of it, with the least whole-period error is kept (`chooseWholePeriods`).
 *
 * @returns groups in order of their first frame, ids such as `l1-r2-p90`, `l1-r2-ref`, `l1-r2-dark` (`-2` for a second one
 *   of a kind); `frequencyHz` is the line's measured frequency. Regimes that no frame fits into give a flag, no group.
 */
export function cutFrames(input: CutInput): CutResult {
  const { regimes, alignment, exposureSeconds, guardSeconds = 0.001, plan = [] } = input
  const starts = Float64Array.from(input.frameTimesSeconds, time => alignment.offsetSeconds + (1 + alignment.driftPpm * 1e-6) * time)
  const placed = placeRegimes(regimes, assignLines(regimes, plan))
  const flags: Flag[] = []
  const groups: Group[] = []
  if (!placed.length) {
    flags.push({ code: 'no-lines', severity: 'problem', message: 'No harmonic lamp was found, so there is nothing to sum; check the illumination channel and the alignment.' })
  }
  for (const place of placed) {
    const regime = regimes[place.index]
    const group = makeGroup(regime, place, starts, exposureSeconds, guardSeconds)
    if (group.frameCount > 0) {
      group.flags = groupFlags(group, regime, exposureSeconds, place.line.planned !== null, plan.length > 0)
      groups.push(group)
    } else if (regime.kind !== 'dark') {
      flags.push(outsideFlag(regime, starts, exposureSeconds))
    }
  }
  groups.sort((a, b) => a.firstFrame - b.firstFrame)
  nameGroups(groups)
  for (const key of new Set(groups.map(repetitionKey))) flags.push(...repetitionFlags(groups.filter(group => repetitionKey(group) === key)))
  flags.push(...planFlags(groups, plan))
  return { groups, flags }
}

function repetitionKey(group: Group): string {
  return `${group.line}/${group.repetition}`
}

function makeGroup(regime: Regime, place: Placed, starts: Float64Array, exposureSeconds: number, guardSeconds: number): Group {
  const inside = framesInside(starts, exposureSeconds, guardSeconds, regime.startSeconds, regime.endSeconds)
  const role = regime.kind === 'dark' ? 'dark' : regime.kind === 'constant' ? 'reference' : 'phase'
  let { first, count } = inside
  if (role === 'phase' && count > 1) {
    const startsSeconds = starts.slice(first, first + count)
    const choice = chooseWholePeriods({ startsSeconds, exposureSeconds, frequencyHz: place.line.frequencyHz, depth: regime.depth ?? 0 })
    first += choice.first
    count = choice.count
  }
  return {
    id: '', line: place.line.line, frequencyHz: place.line.frequencyHz, repetition: place.repetition, role,
    lampPhaseDeg: regime.lampPhaseDeg, depth: regime.depth, firstFrame: first, frameCount: count, accepted: true, flags: [],
  }
}

function outsideFlag(regime: Regime, starts: Float64Array, exposureSeconds: number): Flag {
  const at = `The ${regime.kind === 'constant' ? 'reference' : 'harmonic'} regime at ${regime.startSeconds.toFixed(2)} s of the record`
  const outside = regime.endSeconds < starts[0] || regime.startSeconds > starts[starts.length - 1] + exposureSeconds
  return outside
    ? { code: 'regime-outside-clip', severity: 'note', message: `${at} was not filmed.` }
    : { code: 'regime-without-frames', severity: 'warning', message: `${at} is too short to hold a whole exposure with its guard.` }
}
