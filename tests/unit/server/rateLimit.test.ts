import { describe, expect, it } from 'vitest'
import { createRateLimiter } from '../../../server/utils/rateLimit'

function limiterAt(start = 0) {
  const clock = { now: start }
  return { clock, limiter: createRateLimiter({ attempts: 3, windowMs: 1000, keys: 5, now: () => clock.now }) }
}
const refusal = expect.objectContaining({ code: 'too-many-attempts' })

describe('rate limiter', () => {
  it('refuses the attempt after the allowed number, of that key only', () => {
    const { limiter } = limiterAt()
    for (let attempt = 0; attempt < 3; attempt++) limiter.count('a')
    expect(() => limiter.count('a')).toThrow(refusal)
    expect(() => limiter.count('b')).not.toThrow()
  })

  it('allows again as attempts leave the window, one by one', () => {
    const { limiter, clock } = limiterAt()
    for (const at of [0, 400, 800]) {
      clock.now = at
      limiter.count('a')
    }
    clock.now = 1001
    limiter.count('a')
    expect(() => limiter.count('a')).toThrow(refusal)
  })

  it('does not prolong the wait by refused attempts', () => {
    const { limiter, clock } = limiterAt()
    for (let attempt = 0; attempt < 3; attempt++) limiter.count('a')
    clock.now = 999
    expect(() => limiter.count('a')).toThrow(refusal)
    clock.now = 1001
    expect(() => limiter.count('a')).not.toThrow()
  })

  it('starts over after a success', () => {
    const { limiter } = limiterAt()
    for (let attempt = 0; attempt < 3; attempt++) limiter.count('a')
    limiter.forget('a')
    expect(() => limiter.count('a')).not.toThrow()
  })

  it('remembers a bounded number of keys, the latest ones', () => {
    const { limiter } = limiterAt()
    for (let attempt = 0; attempt < 3; attempt++) limiter.count('old')
    for (let key = 0; key < 4; key++) limiter.count(`new ${key}`)
    expect(() => limiter.count('old')).toThrow(refusal)
    limiter.count('new 4')
    expect(() => limiter.count('old')).not.toThrow()
  })
})
