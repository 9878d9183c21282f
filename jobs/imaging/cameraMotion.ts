import { checkDefinitions } from '../../shared/checks'
import type { Group } from '../../shared/measurement'
import type { Shift } from './shift'

/** Phase groups show the motion itself, so only groups of nearly the same lamp phase are compared. */
const samePhaseDeg = 3

/** Shift of the sum of group b against that of group a; both are indices into the line's groups. */
export type Register = (a: number, b: number) => Shift | Promise<Shift>

export interface RepetitionMotion {
  /** Largest distance of one of the repetition's groups from where the others of its kind lie, px; null with nothing to compare. */
  distance: number | null
  /** False when a picture could not be matched with the others at all. */
  matched: boolean
}

/** Where a group's picture lies; positions are comparable only within one island of pictures that match. */
interface Place {
  repetition: number
  kind: number
  island: number
  dx: number
  dy: number
}

/**
 * Apparent camera motion of each repetition. Every lit group's sum is registered with one of its kind (references with
 * references, phases with phases of the same lamp phase). The repetition that most others agree with, within the limit
 * and in every kind, is where the camera stood; the distance of each repetition from it is its motion. When two camps of
 * the same size disagree nobody can say which one moved, and all of both bear the distance.
 *
 * @param register called for n − 1 pairs of every kind of n pictures, more when pictures do not match
 * @returns repetition → motion, for repetitions with lit groups
 */
export async function repetitionMotion(groups: readonly Group[], register: Register): Promise<Map<number, RepetitionMotion>> {
  const placed = (await Promise.all(kindsOf(groups).map((members, kind) => placeAll(groups, members, kind, register)))).flat()
  const repetitions = [...new Set(groups.filter(isLit).map(group => group.repetition))].sort((a, b) => a - b)
  const distance = (a: number, b: number) => largestDistance(placed, a, b)
  const camps = repetitions.map(centre => ({ centre, members: repetitions.filter(other => agrees(distance(centre, other))) }))
  const spread = ({ centre, members }: (typeof camps)[number]) => members.reduce((sum, other) => sum + (distance(centre, other) ?? 0), 0)
  const best = camps.reduce((a, b) => b.members.length > a.members.length || (b.members.length === a.members.length && spread(b) < spread(a)) ? b : a, camps[0])
  const rival = camps.find(camp => camp.members.length === best.members.length && camp.members.every(member => !best.members.includes(member)))
  const judges = rival ? [...best.members, ...rival.members] : repetitions.length === 2 ? repetitions : [best?.centre]
  return new Map(repetitions.map((repetition) => {
    const compared = repetitions.some(other => other !== repetition && distance(repetition, other) !== null)
    const distances = [...compared ? [0] : [], ...[...judges, repetition].flatMap(other => distance(repetition, other) ?? [])]
    const furthest = distances.length ? Math.max(...distances) : null
    return [repetition, { distance: furthest === Infinity ? null : furthest, matched: furthest !== Infinity }]
  }))
}

const isLit = ({ role, frameCount }: Group) => role !== 'dark' && frameCount > 0
const agrees = (distance: number | null) => distance === null || distance <= checkDefinitions['camera-motion'].limit

/** Over the kinds that both have; of a repetition with itself when it has several groups of a kind. Infinity when pictures do not match, null when there is nothing to compare. */
function largestDistance(placed: readonly Place[], a: number, b: number): number | null {
  let largest: number | null = null
  for (const one of placed) {
    if (one.repetition !== a) continue
    for (const other of placed) {
      if (other === one || other.repetition !== b || other.kind !== one.kind) continue
      largest = Math.max(largest ?? 0, other.island === one.island ? Math.hypot(one.dx - other.dx, one.dy - other.dy) : Infinity)
    }
  }
  return largest
}

/** Registers all pictures of a kind with the first; those that do not match it form further islands. */
async function placeAll(groups: readonly Group[], members: readonly number[], kind: number, register: Register): Promise<Place[]> {
  const placed: Place[] = []
  let island = 0
  for (let left = [...members]; left.length; island++) {
    const [base, ...others] = left
    const shifts = await Promise.all(others.map(async g => ({ g, shift: await register(base, g) })))
    placed.push({ repetition: groups[base].repetition, kind, island, dx: 0, dy: 0 })
    for (const { g, shift: { converged, dx, dy } } of shifts) if (converged) placed.push({ repetition: groups[g].repetition, kind, island, dx, dy })
    left = shifts.filter(({ shift }) => !shift.converged).map(({ g }) => g)
  }
  return placed
}

/** Lists of group indices that can be compared with each other. */
function kindsOf(groups: readonly Group[]): number[][] {
  const lists: { phaseDeg: number | null, members: number[] }[] = []
  groups.forEach((group, g) => {
    const phaseDeg = group.role === 'phase' ? group.lampPhaseDeg : null
    if (!isLit(group) || (group.role === 'phase' && phaseDeg === null)) return
    const list = lists.find(other => phaseDeg === null ? other.phaseDeg === null : other.phaseDeg !== null && Math.abs(180 - Math.abs(180 - Math.abs(other.phaseDeg - phaseDeg) % 360)) <= samePhaseDeg)
    if (list) list.members.push(g)
    else lists.push({ phaseDeg, members: [g] })
  })
  return lists.map(({ members }) => members)
}
