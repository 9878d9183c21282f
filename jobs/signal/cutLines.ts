import type { PlanLine, Regime } from '../../shared/measurement'

export interface LampLine {
  /** Counts from 1: the plan's order when planned, then order of first appearance. */
  line: number
  frequencyHz: number
  planned: PlanLine | null
}

/** Half the distance to the nearest other planned line, at most 2 % and at least 0.05 Hz. */
function planTolerance(plan: PlanLine[], index: number): number {
  const own = plan[index].frequencyHz
  let tolerance = Math.max(0.02 * own, 0.5)
  plan.forEach((other, k) => {
    if (k !== index && other.frequencyHz !== own) tolerance = Math.min(tolerance, Math.abs(other.frequencyHz - own) / 2)
  })
  return Math.max(tolerance, 0.05)
}

function nearestPlanned(plan: PlanLine[], frequencyHz: number): number {
  let nearest = -1
  plan.forEach((entry, k) => {
    const gap = Math.abs(entry.frequencyHz - frequencyHz)
    if (gap <= planTolerance(plan, k) && (nearest < 0 || gap < Math.abs(plan[nearest].frequencyHz - frequencyHz))) nearest = k
  })
  return nearest
}

/**
 * Give every harmonic regime its line: the nearest planned one within half the distance to the next planned line (at most
 * 2 %), else a line of its own for each frequency found (within 0.2 Hz or 0.05 %), numbered after the planned ones in order of
 * first appearance.
 *
 * @returns the line of each regime, null for dark and constant ones; a line's frequency is that of its first regime
 */
export function assignLines(regimes: Regime[], plan: PlanLine[] = []): (LampLine | null)[] {
  const planned = new Map<number, LampLine>()
  const unplanned: LampLine[] = []
  return regimes.map((regime) => {
    if (regime.kind !== 'harmonic' || regime.frequencyHz === null) return null
    const frequencyHz = regime.frequencyHz
    const index = nearestPlanned(plan, frequencyHz)
    if (index >= 0) {
      const line = planned.get(index) ?? { line: index + 1, frequencyHz, planned: plan[index] }
      planned.set(index, line)
      return line
    }
    const tolerance = Math.max(0.2, 5e-4 * frequencyHz)
    const known = unplanned.find(line => Math.abs(line.frequencyHz - frequencyHz) < tolerance)
    if (known) return known
    const made = { line: plan.length + unplanned.length + 1, frequencyHz, planned: null }
    unplanned.push(made)
    return made
  })
}
