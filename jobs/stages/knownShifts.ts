import type { Shift } from '../imaging/shift'
import type { KnownShift } from '../../shared/frameSetReview'

/** Registers pairs of sums, those that an earlier run has registered only by looking them up. `used` fills as pairs are asked for. */
export function knownShifts(known: readonly KnownShift[], sha256: readonly string[], register: (a: number, b: number) => Promise<Shift>): { register: (a: number, b: number) => Promise<Shift>, used: KnownShift[] } {
  const used: KnownShift[] = []
  return {
    used,
    async register(a, b) {
      const names = { a: sha256[a]!, b: sha256[b]! }
      const found = known.find(shift => shift.a === names.a && shift.b === names.b)
      const { dx, dy, converged, iterations, correlation } = found ?? await register(a, b)
      const shift = { dx, dy, converged, iterations, correlation }
      // JSON knows no NaN: a pair that did not match is registered again.
      if (converged) used.push({ ...names, ...shift })
      return shift
    },
  }
}
