import type { Group } from '../../shared/measurement'
import { estimateShift } from './shift'

/** Phase groups show the motion itself, so only groups of nearly the same lamp phase are compared. */
const samePhaseDeg = 3

interface Placed {
  repetition: number
  dx: number
  dy: number
  matched: boolean
}

export interface RepetitionMotion {
  /** Largest distance of one of the repetition's groups from where the others of its kind lie, px; null with nothing to compare. */
  distance: number | null
  /** False when a picture could not be matched with the others at all. */
  matched: boolean
}

/**
 * Apparent camera motion of each repetition: every lit group's sum is registered with the others of its kind (references
 * with references, phases with phases of the same lamp phase) and its distance from the kind's most central one is taken.
 *
 * @param sums one image per group, H·W
 * @returns repetition → motion, for repetitions with lit groups
 */
export function repetitionMotion(groups: readonly Group[], sums: readonly Uint32Array[], width: number, height: number): Map<number, RepetitionMotion> {
  const motion = new Map<number, RepetitionMotion>()
  for (const kind of kinds(groups)) {
    const placed = kind.map(g => place(groups[g].repetition, sums[kind[0]], sums[g], width, height))
    const centre = mostCentral(placed.filter(({ matched }) => matched))
    for (const { repetition, dx, dy, matched } of placed) {
      const seen = motion.get(repetition) ?? { distance: null, matched: true }
      // With two pictures nobody can say which one moved: both bear the distance.
      const distance = placed.length === 1 ? null : placed.length === 2 ? Math.hypot(placed[1].dx, placed[1].dy) : Math.hypot(dx - centre.dx, dy - centre.dy)
      motion.set(repetition, {
        distance: matched && distance !== null && Number.isFinite(distance) ? Math.max(distance, seen.distance ?? 0) : seen.distance,
        matched: seen.matched && matched,
      })
    }
  }
  return motion
}

function place(repetition: number, base: Uint32Array, sum: Uint32Array, width: number, height: number): Placed {
  if (sum === base) return { repetition, dx: 0, dy: 0, matched: true }
  const { dx, dy, converged } = estimateShift(base, sum, width, height)
  return { repetition, dx, dy, matched: converged }
}

/** Lists of group indices that can be compared with each other. */
function kinds(groups: readonly Group[]): number[][] {
  const lists: { phaseDeg: number | null, members: number[] }[] = []
  groups.forEach(({ role, lampPhaseDeg, frameCount }, g) => {
    if (role === 'dark' || frameCount === 0) return
    const phaseDeg = role === 'phase' ? lampPhaseDeg : null
    if (role === 'phase' && phaseDeg === null) return
    const list = lists.find(other => phaseDeg === null ? other.phaseDeg === null : other.phaseDeg !== null && Math.abs(180 - Math.abs(180 - Math.abs(other.phaseDeg - phaseDeg) % 360)) <= samePhaseDeg)
    if (list) list.members.push(g)
    else lists.push({ phaseDeg, members: [g] })
  })
  return lists.map(({ members }) => members)
}

function mostCentral(placed: readonly Placed[]): Placed {
  const total = (from: Placed) => placed.reduce((sum, to) => sum + Math.hypot(from.dx - to.dx, from.dy - to.dy), 0)
  return placed.reduce((best, candidate) => total(candidate) < total(best) ? candidate : best)
}
