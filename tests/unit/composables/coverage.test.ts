import { beforeAll, describe, expect, it } from 'vitest'
import * as format from '../../../composables/format'
import { coverageLabel, coverageSentence, frequencyAxis, labelRows, linearTicks } from '../../../composables/coverage'
import { stubAutoImports } from './autoImports'

beforeAll(() => stubAutoImports(format))
const line = (frequencyHz: number, state: 'missing' | 'shot' | 'summed' | 'released', planned = true) => ({ frequencyHz, planned, state, repetitionsPlanned: planned ? 3 : 0, repetitionsGood: state === 'summed' ? 2 : 0, acquisitionId: null })

describe('the frequency axis', () => {
  it('keeps the outermost lines inside by the inset', () => {
    const axis = frequencyAxis([112, 944, 500], 1240, 40)
    expect(axis.toX(112)).toBeCloseTo(40)
    expect(axis.toX(944)).toBeCloseTo(1200)
    expect(axis.logarithmic).toBe(false)
  })
  it('turns logarithmic when lines span more than a factor of 20', () => {
    const axis = frequencyAxis([10, 100, 1000], 1000, 0)
    expect(axis.logarithmic).toBe(true)
    expect(axis.toX(100)).toBeCloseTo(500)
    expect(axis.ticks.map(tick => tick.frequencyHz)).toEqual([10, 20, 50, 100, 200, 500, 1000])
  })
  it('puts a single line in the middle', () => {
    expect(frequencyAxis([412], 1000, 40).toX(412)).toBeCloseTo(500)
  })
  it('ticks at round numbers', () => {
    expect(linearTicks(112, 944, 8)).toEqual([200, 400, 600, 800])
    expect(linearTicks(0, 0.3, 3)).toEqual([0, 0.1, 0.2, 0.3])
  })
})

describe('labels on the axis', () => {
  it('moves a label that would touch its neighbour to the next row', () => {
    expect(labelRows([100, 110, 300], [40, 40, 40], 3)).toEqual([0, 1, 0])
  })
  it('leaves out what has no room left', () => {
    expect(labelRows([100, 101, 102], [40, 40, 40], 2)).toEqual([0, 1, null])
  })
})

describe('coverage in words', () => {
  it('counts by state and asks for the missing ones', () => {
    expect(coverageSentence([line(112, 'released'), line(412, 'missing'), line(500, 'missing')]).replace(/\u00A0/g, ' ')).toBe('3 lines: 2 missing, 1 released. Shoot the 2 missing lines before the rig is taken down.')
  })
  it('says frequency, state, repetitions and whether it was planned', () => {
    expect(coverageLabel(line(221, 'summed')).replace(/\u00A0/g, ' ')).toBe('221 Hz summed, 2 of 3 repetitions good')
    expect(coverageLabel(line(221, 'summed', false))).toContain('not in the plan')
  })
})
