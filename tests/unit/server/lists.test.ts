import { describe, expect, it } from 'vitest'
import { containing, decodeCursor, encodeCursor, pageOf } from '../../../server/utils/lists'

const row = (milliseconds: number, id: string) => ({ createdAt: new Date(milliseconds), id })

describe('cursor', () => {
  it('comes back as the position it was made of, to the millisecond', () => {
    const position = row(1_764_583_200_123, '7f3c2a10-0000-4000-8000-000000000001')
    expect(decodeCursor(encodeCursor(position))).toEqual(position)
    expect(decodeCursor(undefined)).toBeNull()
  })

  it.each(['xx', 'MTIz', Buffer.from('12.a b').toString('base64url'), Buffer.from('-1.a').toString('base64url')])('refuses %s, which no list gave out', (cursor) => {
    expect(() => decodeCursor(cursor)).toThrow(expect.objectContaining({ code: 'bad-input' }))
  })
})

describe('page', () => {
  it('points at its last row when there is more, and nowhere when there is not', () => {
    const rows = [row(3, 'c'), row(2, 'b'), row(1, 'a')]
    expect(pageOf(rows, 2)).toEqual({ rows: rows.slice(0, 2), nextCursor: encodeCursor(rows[1]!) })
    expect(pageOf(rows, 3)).toEqual({ rows, nextCursor: null })
    expect(pageOf([], 3)).toEqual({ rows: [], nextCursor: null })
  })
})

it('a search text is taken literally', () => expect(containing('50 %_\\')).toBe('%50 \\%\\_\\\\%'))
