// @vitest-environment happy-dom
import { nextTick } from 'vue'
import { describe, expect, it } from 'vitest'
import { planRow } from '../../../composables/acquisitionForm'
import { settled, show, visited } from './support'

const line = (frequencyHz: number, state: string, acquisitionId: string | null = null) => ({ frequencyHz, planned: true, state, repetitionsPlanned: 3, repetitionsGood: state === 'missing' ? 0 : 3, acquisitionId })

describe('CoverageAxis', () => {
  const lines = [line(731, 'summed', 'a2'), line(112, 'released', 'a1'), line(412, 'missing')]
  const marks = (axis: ReturnType<typeof show>) => axis.findAll('g[aria-label]')

  it('has a mark for every line, in order of frequency, with its words', async () => {
    const axis = show('CoverageAxis', { props: { lines, links: true } })
    await settled()
    expect(marks(axis).map(mark => mark.attributes('aria-label')!.replace(/\u00A0/g, ' '))).toEqual(['112 Hz released, 3 of 3 repetitions good', '412 Hz missing, 0 of 3 repetitions good', '731 Hz summed, 3 of 3 repetitions good'])
    expect(new Set(axis.findAll('[data-state]').slice(0, 3).map(mark => mark.html())).size).toBe(3)
  })
  it('is one stop for Tab; arrow keys walk the lines and Enter opens the acquisition', async () => {
    const axis = show('CoverageAxis', { props: { lines, links: true } })
    await settled()
    const stops = () => marks(axis).map(mark => mark.attributes('tabindex'))
    expect(stops()).toEqual(['0', '-1', '-1'])
    await axis.find('svg[role=group]').trigger('keydown', { key: 'End' })
    await nextTick()
    expect(stops()).toEqual(['-1', '-1', '0'])
    await marks(axis)[2]!.trigger('keydown', { key: 'Enter' })
    expect(visited.at(-1)).toBe('/acquisitions/a2')
  })
  it('is no link for guests', async () => {
    const axis = show('CoverageAxis', { props: { lines, links: false } })
    await settled()
    expect(marks(axis).every(mark => mark.attributes('role') === 'img')).toBe(true)
  })
})

describe('ChecksTable', () => {
  const check = (checkId: string, repetition: number | null, value: number | null, passed: boolean) => ({ checkId, repetition, value, unit: 'px', limit: 0.05, passed, message: `${checkId} message` })
  it('groups by repetition, what has not passed first, and never shows a value that was not measured', async () => {
    const table = show('ChecksTable', { props: { checks: [check('camera-motion', 2, 0.006, true), check('residual', 2, null, false), check('conditioning', null, 1.8, true)] } })
    await settled()
    const rows = table.findAll('tbody tr').map(row => row.text().replace(/\s+/g, ' '))
    expect(rows[0]).toBe('The whole line')
    expect(rows[2]).toBe('Repetition 2')
    expect(rows[3]).toContain('not measured')
    expect(rows[3]).toContain('not known')
    expect(rows[4]).toContain('Camera motion')
    expect(rows[4]).toContain('≤ 0.05')
    expect(rows[4]).toContain('passed')
  })
})

describe('GroupTable', () => {
  const group = (id: string, firstFrame: number, accepted: boolean) => ({ id, line: 1, frequencyHz: 412, repetition: 1, role: 'phase', lampPhaseDeg: 90, depth: 0.88, firstFrame, frameCount: 59, accepted, flags: [] })
  it('keeps rejected groups in sight, in the order of the clip, and says they are left out', async () => {
    const table = show('GroupTable', { props: { groups: [group('b', 72, false), group('a', 12, true)] } })
    const rows = table.findAll('tbody tr').map(row => row.text())
    expect(rows).toHaveLength(2)
    expect(rows[0]).toContain('12')
    expect(rows[1]).toContain('Left out.')
  })
})

describe('PlanEditor', () => {
  const paste = async (editor: ReturnType<typeof show>, text: string) => {
    const event = Object.assign(new Event('paste', { bubbles: true, cancelable: true }), { clipboardData: { getData: () => text } })
    editor.find('tbody input').element.dispatchEvent(event)
    await settled()
    return event
  }
  it('turns a pasted list into rows and takes the repetitions of the row it was pasted in', async () => {
    const editor = show('PlanEditor', { props: { modelValue: [planRow(null, 5)] } })
    await settled()
    const event = await paste(editor, '112\n148,5\n486.2 x2')
    expect(event.defaultPrevented).toBe(true)
    const rows = editor.emitted('update:modelValue')!.at(-1)![0] as { frequencyHz: number, repetitions: number }[]
    expect(rows.map(row => [row.frequencyHz, row.repetitions])).toEqual([[112, 5], [148.5, 5], [486.2, 2]])
  })
  it('leaves a single pasted number to the field', async () => {
    const editor = show('PlanEditor', { props: { modelValue: [planRow()] } })
    await settled()
    expect((await paste(editor, '148,5')).defaultPrevented).toBe(false)
  })
  it('warns of lines in the range where flicker is worst', async () => {
    const editor = show('PlanEditor', { props: { modelValue: [planRow(45, 3)] } })
    await settled()
    expect(editor.text()).toContain('photosensitive')
  })
})
