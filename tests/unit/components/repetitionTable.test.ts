// @vitest-environment happy-dom
import { describe, expect, it } from 'vitest'
import { settled, show } from './support'

const group = (repetition: number, role: string, accepted = true) => ({ id: `${role}${repetition}`, line: 1, frequencyHz: 412, repetition, role, lampPhaseDeg: null, depth: null, firstFrame: 0, frameCount: 50, accepted, flags: [] })
const check = (checkId: string, repetition: number, value: number | null, passed: boolean, message = 'A message.') => ({ checkId, repetition, value, unit: checkId === 'residual' ? '×' : 'px', limit: 0.05, passed, message })
const set = {
  groups: [group(1, 'reference'), group(1, 'phase'), group(2, 'dark'), group(2, 'reference', false), group(2, 'phase', false), group(3, 'reference')],
  checks: [check('camera-motion', 1, 0.004, true), check('camera-motion', 2, 0.31, false), check('residual', 2, 12, false), check('camera-motion', 3, 0.09, false, 'Camera motion 0.09 px, limit 0.05 px.')],
  rejections: [{ repetition: 2, by: 'program', byId: null, reason: 'Camera motion 0.31 px, limit 0.05 px.' }],
}
const table = (changes = {}) => show('RepetitionTable', { props: { set, mayDecide: true, busy: false, pending: null, ...changes } })
const rowsOf = (shown: ReturnType<typeof show>) => shown.findAll('tbody tr').map(row => row.text().replaceAll(/[\s\u00A0]+/g, ' '))

describe('RepetitionTable', () => {
  it('says of every repetition whether it is used, what was measured, and why', async () => {
    const shown = table()
    await settled()
    const rows = rowsOf(shown)
    expect(rows[0]).toMatch(/^1 ?used ?100 ?0\.0040 px ?not measured/)
    expect(rows[1]).toContain('left out')
    expect(rows[1]).toContain('0.31 px (not passed)')
    expect(rows[1]).toContain('Left out by the program. Camera motion 0.31 px, limit 0.05 px.')
    expect(rows[2]).toContain('Used, although it fails: Camera motion 0.09 px')
  })

  it('asks for the other state when a switch is used, and names it for a screen reader', async () => {
    const shown = table()
    const switches = shown.findAll('input[role=switch]')
    expect(switches.map(each => [each.attributes('aria-label'), (each.element as HTMLInputElement).checked])).toEqual([['Use repetition 1', true], ['Use repetition 2', false], ['Use repetition 3', true]])
    await switches[1]!.trigger('click')
    await switches[0]!.trigger('click')
    expect(shown.emitted('decide')).toEqual([[2, true], [1, false]])
  })

  it('is locked while the set is solved, and has no switches for who may not decide', async () => {
    expect(table({ busy: true, pending: 2 }).findAll('input').every(each => each.attributes('disabled') !== undefined)).toBe(true)
    expect(table({ mayDecide: false }).findAll('input')).toEqual([])
  })
})
