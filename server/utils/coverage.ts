import type { Group, PlanLine } from '#shared/measurement'
import type { CoverageLine } from '#shared/schemas/campaigns'

/** Planned lines this close are one line. */
const planTolerance = 0.001
/** A lamp may miss its planned frequency by this much, but by no more than half the way to the next planned line. */
const lampTolerance = 0.02

export interface CoverageAcquisition {
  id: string
  plan: PlanLine[]
  /** A clip is stored. */
  hasClip: boolean
  /** Frequencies that its cut list found; null before it was cut. */
  linesFoundHz: number[] | null
}

export interface CoverageFrameSet {
  acquisitionId: string
  frequencyHz: number
  released: boolean
  repetitionsGood: number
}

const rank: Record<CoverageLine['state'], number> = { missing: 0, shot: 1, summed: 2, released: 3 }

/**
 * How far every line of a campaign has come: the plans of all its acquisitions merged, and the lines that were found
 * without being planned. A line that an acquisition planned counts as shot when its clip is there, until the cut
 * list shows that the line is not in it.
 */
export function coverageOf(acquisitions: CoverageAcquisition[], frameSets: CoverageFrameSet[]): CoverageLine[] {
  const lines = mergePlans(acquisitions)
  const raise = (line: CoverageLine, state: CoverageLine['state'], acquisitionId: string) => {
    if (rank[state] < rank[line.state] || (rank[state] === rank[line.state] && line.acquisitionId)) return
    line.state = state
    line.acquisitionId = acquisitionId
  }
  for (const acquisition of acquisitions) {
    const found = acquisition.linesFoundHz ?? (acquisition.hasClip ? acquisition.plan.map(line => line.frequencyHz) : [])
    for (const frequencyHz of found) raise(lineAt(lines, frequencyHz), 'shot', acquisition.id)
  }
  for (const set of frameSets) {
    const line = lineAt(lines, set.frequencyHz)
    line.repetitionsGood += set.repetitionsGood
    raise(line, set.released ? 'released' : 'summed', set.acquisitionId)
  }
  return lines.sort((a, b) => a.frequencyHz - b.frequencyHz)
}

function mergePlans(acquisitions: CoverageAcquisition[]): CoverageLine[] {
  const lines: CoverageLine[] = []
  for (const { frequencyHz, repetitions = 1 } of acquisitions.flatMap(acquisition => acquisition.plan)) {
    const known = lines.find(line => Math.abs(line.frequencyHz - frequencyHz) <= planTolerance * line.frequencyHz)
    if (known) known.repetitionsPlanned += repetitions
    else lines.push({ frequencyHz, planned: true, state: 'missing', repetitionsPlanned: repetitions, repetitionsGood: 0, acquisitionId: null })
  }
  return lines
}

/** The planned line that a measured frequency belongs to; one that belongs to none becomes a line of its own. */
function lineAt(lines: CoverageLine[], frequencyHz: number): CoverageLine {
  const [nearest] = [...lines].sort((a, b) => Math.abs(a.frequencyHz - frequencyHz) - Math.abs(b.frequencyHz - frequencyHz))
  if (nearest && Math.abs(nearest.frequencyHz - frequencyHz) <= toleranceOf(nearest, lines)) return nearest
  const line: CoverageLine = { frequencyHz, planned: false, state: 'missing', repetitionsPlanned: 0, repetitionsGood: 0, acquisitionId: null }
  lines.push(line)
  return line
}

function toleranceOf(line: CoverageLine, lines: CoverageLine[]): number {
  if (!line.planned) return planTolerance * line.frequencyHz
  const gaps = lines.filter(other => other !== line && other.planned).map(other => Math.abs(other.frequencyHz - line.frequencyHz) / 2)
  return Math.min(lampTolerance * line.frequencyHz, ...gaps)
}

/** Repetitions of a frame set; a good one has every group of light accepted. */
export function countRepetitions(groups: Pick<Group, 'repetition' | 'role' | 'accepted'>[]): { repetitions: number, repetitionsGood: number } {
  const good = new Map<number, boolean>()
  for (const group of groups.filter(each => each.role !== 'dark')) good.set(group.repetition, (good.get(group.repetition) ?? true) && group.accepted)
  return { repetitions: good.size, repetitionsGood: [...good.values()].filter(Boolean).length }
}
