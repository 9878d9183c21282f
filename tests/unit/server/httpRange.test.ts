import { describe, expect, it } from 'vitest'
import { isUnchanged, mayAnswerPart, parseRange } from '../../../server/utils/httpRange'

const part = (start: number, end: number) => ({ kind: 'part', start, end })
const whole = { kind: 'whole' }
const unsatisfiable = { kind: 'unsatisfiable' }

describe('Range (RFC 9110, section 14)', () => {
  it.each([
    ['bytes=0-499', part(0, 499)],
    ['bytes=500-', part(500, 999)],
    ['bytes=-200', part(800, 999)],
    ['bytes=-5000', part(0, 999)],
    ['bytes=900-5000', part(900, 999)],
    ['bytes=999-999', part(999, 999)],
    ['Bytes = 0 - 1', part(0, 1)],
    ['bytes=1000-', unsatisfiable],
    ['bytes=1000-2000', unsatisfiable],
    ['bytes=-0', unsatisfiable],
    ['bytes=5-2', whole],
    ['bytes=-', whole],
    ['bytes=0-1,5-6', whole],
    ['lines=0-1', whole],
    ['bytes=a-b', whole],
    [undefined, whole],
  ])('%s of 1000 bytes', (header, asked) => expect(parseRange(header, 1000)).toEqual(asked))

  it('nothing of an empty file can be had in part', () => {
    expect(parseRange('bytes=0-', 0)).toEqual(unsatisfiable)
    expect(parseRange('bytes=-1', 0)).toEqual(unsatisfiable)
  })
})

describe('conditions', () => {
  it('a part is only for those who have the rest of the same file', () => {
    expect([mayAnswerPart(undefined, '"a"'), mayAnswerPart('"a"', '"a"')]).toEqual([true, true])
    expect([mayAnswerPart('"b"', '"a"'), mayAnswerPart('W/"a"', '"a"'), mayAnswerPart('Tue, 01 Dec 2026 10:00:00 GMT', '"a"')]).toEqual([false, false, false])
  })

  it('If-None-Match compares weakly and takes lists', () => {
    expect(['"a"', 'W/"a"', '"b", "a"', '*'].map(header => isUnchanged(header, '"a"'))).toEqual([true, true, true, true])
    expect([undefined, '"b"', 'a'].map(header => isUnchanged(header, '"a"'))).toEqual([false, false, false])
  })
})
