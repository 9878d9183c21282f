import { describe, expect, it } from 'vitest'
import { countRepetitions, coverageOf, type CoverageAcquisition } from '../../../server/utils/coverage'

const acquisition = (id: string, plan: CoverageAcquisition['plan'], changes: Partial<CoverageAcquisition> = {}): CoverageAcquisition => ({ id, plan, hasClip: false, linesFoundHz: null, ...changes })
const set = (acquisitionId: string, frequencyHz: number, released = false, repetitionsGood = 3) => ({ acquisitionId, frequencyHz, released, repetitionsGood })
const short = (lines: ReturnType<typeof coverageOf>) => lines.map(({ frequencyHz, planned, state, acquisitionId }) => [frequencyHz, planned, state, acquisitionId])

describe('coverage of a campaign', () => {
  it('merges planned lines within 0.1 % and adds their repetitions', () => {
    const lines = coverageOf([acquisition('a', [{ frequencyHz: 100, repetitions: 3 }, { frequencyHz: 50 }]), acquisition('b', [{ frequencyHz: 100.09, repetitions: 2 }, { frequencyHz: 100.2 }])], [])
    expect(lines.map(line => [line.frequencyHz, line.repetitionsPlanned])).toEqual([[50, 1], [100, 5], [100.2, 1]])
    expect(lines.every(line => line.state === 'missing' && line.acquisitionId === null)).toBe(true)
  })

  it('counts a planned line as shot when its clip is there, until the cut list shows that it is not in it', () => {
    const plan = [{ frequencyHz: 100 }, { frequencyHz: 200 }]
    expect(short(coverageOf([acquisition('a', plan, { hasClip: true })], []))).toEqual([[100, true, 'shot', 'a'], [200, true, 'shot', 'a']])
    expect(short(coverageOf([acquisition('a', plan, { hasClip: true, linesFoundHz: [100.4] })], []))).toEqual([[100, true, 'shot', 'a'], [200, true, 'missing', null]])
  })

  it('takes the furthest state of a line and the acquisition that got there', () => {
    const acquisitions = [acquisition('a', [{ frequencyHz: 100, repetitions: 3 }], { hasClip: true }), acquisition('b', [{ frequencyHz: 100, repetitions: 3 }], { hasClip: true })]
    const [line] = coverageOf(acquisitions, [set('a', 100.01, false, 2), set('b', 99.99, true, 3)])
    expect(line).toEqual({ frequencyHz: 100, planned: true, state: 'released', repetitionsPlanned: 6, repetitionsGood: 5, acquisitionId: 'b' })
  })

  it('shows lines that were found without being planned', () => {
    expect(short(coverageOf([acquisition('a', [{ frequencyHz: 100 }])], [set('a', 150), set('b', 150.1)]))).toEqual([[100, true, 'missing', null], [150, false, 'summed', 'a']])
  })

  it('gives a lamp that missed its frequency to the nearer of two close lines', () => {
    const plan = [{ frequencyHz: 100 }, { frequencyHz: 101 }]
    expect(short(coverageOf([acquisition('a', plan)], [set('a', 100.6)]))).toEqual([[100, true, 'missing', null], [101, true, 'summed', 'a']])
  })
})

describe('repetitions of a frame set', () => {
  const group = (repetition: number, role: 'dark' | 'reference' | 'phase', accepted = true) => ({ repetition, role, accepted })

  it('are good when every group of light is accepted; dark groups belong to none', () => {
    const groups = [group(0, 'dark'), group(1, 'reference'), group(1, 'phase'), group(2, 'reference'), group(2, 'phase', false), group(3, 'reference', false)]
    expect(countRepetitions(groups)).toEqual({ repetitions: 3, repetitionsGood: 1 })
  })
})
