import { describe, expect, it } from 'vitest'
import { parseLines, parseNumber } from '../../../composables/parse'

describe('a typed number', () => {
  it('takes points, commas, spaces, thin spaces and a real minus', () => {
    expect(['0.5', '0,5', ' 18 204 ', '18\u202F204', '−0.413', '1e-3', '.5'].map(parseNumber)).toEqual([0.5, 0.5, 18204, 18204, -0.413, 0.001, 0.5])
  })
  it('tells nothing from nonsense', () => {
    expect(parseNumber('  ')).toBeNull()
    for (const text of ['abc', '1.2.3', '1,2,3', '0x10', 'Infinity', '12 Hz']) expect(parseNumber(text)).toBeUndefined()
  })
})

describe('a pasted list of lines', () => {
  const frequencies = (text: string) => parseLines(text).map(line => line.frequencyHz)
  it('comes apart at new lines, tabs, semicolons, spaces and commas', () => {
    for (const text of ['112\n148.5\n213', '112\t148.5\t213', '112; 148.5; 213', '112 148.5 213', '112, 148.5, 213']) expect(frequencies(text)).toEqual([112, 148.5, 213])
  })
  it('reads decimal commas where another separator stands', () => {
    expect(frequencies('112;148,5;213')).toEqual([112, 148.5, 213])
    expect(frequencies('112,0\r\n148,5\r\n213,25')).toEqual([112, 148.5, 213.25])
    expect(frequencies('112,5, 148,5')).toEqual([112.5, 148.5])
    expect(frequencies('148,5')).toEqual([148.5])
  })
  it('reads commas alone as separators', () => {
    expect(frequencies('112,148,213')).toEqual([112, 148, 213])
  })
  it('takes units and repetitions', () => {
    expect(parseLines('412 Hz x3\n1.2 kHz ×5\n731')).toEqual([{ frequencyHz: 412, repetitions: 3 }, { frequencyHz: 1200, repetitions: 5 }, { frequencyHz: 731, repetitions: null }])
  })
  it('finds nothing in words', () => {
    expect(parseLines('see the plan')).toEqual([])
  })
})
