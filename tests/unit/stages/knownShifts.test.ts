import { describe, expect, it, vi } from 'vitest'
import { knownShifts } from '../../../jobs/stages/knownShifts'

const shift = (dx: number, converged = true) => ({ dx, dy: 0, converged, iterations: 1, correlation: 1 })

describe('known shifts', () => {
  it('are looked up for the very pair of sums they belong to, and registered for any other', async () => {
    const register = vi.fn(async (a: number, b: number) => shift(10 * a + b))
    const known = [{ a: 'one', b: 'two', ...shift(0.25) }]
    const shifts = knownShifts(known, ['one', 'two', 'three'], register)
    expect((await shifts.register(0, 1)).dx).toBe(0.25)
    expect((await shifts.register(1, 0)).dx).toBe(10)
    expect((await shifts.register(0, 2)).dx).toBe(2)
    expect(register.mock.calls).toEqual([[1, 0], [0, 2]])
    expect(shifts.used.map(({ a, b, dx }) => [a, b, dx])).toEqual([['one', 'two', 0.25], ['two', 'one', 10], ['one', 'three', 2]])
  })

  it('are not kept of pictures that did not match', async () => {
    const shifts = knownShifts([], ['one', 'two'], async () => shift(Number.NaN, false))
    await shifts.register(0, 1)
    expect(shifts.used).toEqual([])
  })
})
