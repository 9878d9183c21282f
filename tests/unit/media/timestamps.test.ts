import { describe, expect, it } from 'vitest'
import { judgeTimes } from '../../../jobs/media/timestamps'

const milliseconds = { numerator: 1, denominator: 1000 }
const fine = { numerator: 1, denominator: 90_000 }
const ticks = (count: number, of: (frame: number) => number) => Float64Array.from({ length: count }, (_, frame) => Math.round(of(frame)))
const codes = ({ flags }: { flags: { code: string }[] }) => flags.map(({ code }) => code)

describe('frame times', () => {
  it('are those of the exact rate where a container rounds to milliseconds', () => {
    const judged = judgeTimes(ticks(2000, frame => 40 + frame * 1001 / 30), milliseconds, [{ numerator: 30_000, denominator: 1001 }])
    expect(judged).toMatchObject({ variableRate: false, flags: [], frameRate: { numerator: 30_000, denominator: 1001 } })
    expect(judged.frameTimesSeconds[1999]).toBeCloseTo(1999 * 1001 / 30_000, 12)
  })

  it('find a usual rate that the header does not state', () => {
    expect(judgeTimes(ticks(5000, frame => frame * 90_000 * 1001 / 60_000), fine, [{ numerator: 90_000, denominator: 1 }]).frameRate).toEqual({ numerator: 60_000, denominator: 1001 })
  })

  it('start at 0 whatever the first timestamp', () => {
    expect([...judgeTimes(ticks(3, frame => 512 + frame * 1800), fine, [{ numerator: 50, denominator: 1 }]).frameTimesSeconds]).toEqual([0, 0.02, 0.04])
  })

  it('show a gap with the number of frames that are missing, at a rate that is otherwise constant', () => {
    const judged = judgeTimes(ticks(100, frame => 1800 * (frame < 40 ? frame : frame + 3)), fine, [{ numerator: 50, denominator: 1 }])
    expect(judged.variableRate).toBe(false)
    expect(codes(judged)).toEqual(['timestamp-gaps'])
    expect(judged.flags[0].message).toMatch(/^3 frames are missing in 1 gap, the first before frame 40 at 0\.860 s/)
    expect(judged.frameTimesSeconds[40]).toBeCloseTo(0.86, 9)
  })

  it('show repeated timestamps', () => {
    expect(codes(judgeTimes(ticks(100, frame => 1800 * (frame === 50 ? 49 : frame)), fine, [{ numerator: 50, denominator: 1 }]))).toContain('repeated-timestamps')
  })

  it('show a rate that varies, and keep each frame’s own time', () => {
    const judged = judgeTimes(ticks(200, frame => 3000 * frame + 500 * Math.sin(frame)), fine, [{ numerator: 30, denominator: 1 }])
    expect(judged.variableRate).toBe(true)
    expect(codes(judged)).toContain('variable-rate')
    expect(judged.frameTimesSeconds[7]).toBeCloseTo(Math.round(21_000 + 500 * Math.sin(7)) / 90_000, 12)
  })

  it('take a whole missing frame for a gap even where one tick is a whole frame', () => {
    expect(codes(judgeTimes(ticks(20, frame => frame < 10 ? frame : frame + 1), { numerator: 1, denominator: 25 }, [{ numerator: 25, denominator: 1 }]))).toEqual(['timestamp-gaps'])
  })

  it('do with a single frame', () => {
    expect(judgeTimes(Float64Array.of(7), fine, [{ numerator: 50, denominator: 1 }])).toMatchObject({ frameRate: { numerator: 50, denominator: 1 }, variableRate: false })
  })
})
