import { describe, expect, it } from 'vitest'
import { cutFrames } from '../../../jobs/signal/cut'
import { withoutExcluded } from '../../../jobs/signal/cutExcluded'
import { keepSlackSeconds } from '../../../jobs/signal/cutKeep'
import { chooseWholePeriods } from '../../../jobs/signal/wholePeriods'
import { groupSchema, type Group, type Regime } from '../../../shared/measurement'
import { seededUniform } from './synthetic'

const exposureSeconds = 1 / 50
const frameTimesSeconds = Float64Array.from({ length: 1200 }, (_, k) => k / 50)

/** dark, then three times reference, sine and cosine of 211.3 Hz, of about 2 s each. */
function regimes(): Regime[] {
  const kinds = ['dark', 'ref', 0, 90, 'ref', 0, 90, 'ref', 0, 90]
  let now = 0.3
  return kinds.map((kind, k) => {
    const startSeconds = now
    now += 2 + 0.0137 * k
    const phase = typeof kind === 'number'
    return { kind: kind === 'dark' ? 'dark' : phase ? 'harmonic' : 'constant', startSeconds, endSeconds: now, level: kind === 'dark' ? 0 : 1, frequencyHz: phase ? 211.3 : null, lampPhaseDeg: phase ? Number(kind) : null, depth: phase ? 0.9 : null, distortion: phase ? 0.013 : null, flags: [] }
  })
}

const cutAt = (offsetSeconds: number, more: { keep?: Group[], excluded?: { firstFrame: number, frameCount: number }[], exposureSeconds?: number } = {}) =>
  cutFrames({ regimes: regimes(), alignment: { offsetSeconds, driftPpm: 0 }, frameTimesSeconds, exposureSeconds, ...more })
const spansOf = (groups: Group[]) => groups.map(({ id, firstFrame, frameCount }) => `${id} ${firstFrame}+${frameCount}`)
const inside = (group: Group, regime: Regime, offsetSeconds: number, guard: number) =>
  group.firstFrame / 50 + offsetSeconds - guard >= regime.startSeconds && (group.firstFrame + group.frameCount) / 50 + offsetSeconds + guard <= regime.endSeconds

describe('a second cut that keeps the first one\'s choices', () => {
  it('of the same alignment is the same cut list, flags and distortion included', () => {
    const first = cutAt(0).groups
    expect(cutAt(0, { keep: first }).groups).toEqual(first)
    expect(first.map(group => group.distortion)).toEqual([null, null, 0.013, 0.013, null, 0.013, 0.013, null, 0.013, 0.013])
  })

  it('changes few frames for shifts of 0.02 frame, far fewer than a fresh cut, and uses none with less than 0.8 ms of guard', () => {
    const uniform = seededUniform(3)
    const moved = { kept: 0, fresh: 0, all: 0 }
    for (let trial = 0; trial < 200; trial++) {
      const before = 0.02 * uniform()
      const after = before + 0.02 / 50 * (2 * uniform() - 1)
      const first = cutAt(before).groups
      const kept = cutAt(after, { keep: first }).groups
      const fresh = cutAt(after).groups
      kept.forEach((group, g) => {
        expect(inside(group, regimes()[g], after, 0.0008 - 1e-9)).toBe(true)
        expect(group.frameCount).toBeGreaterThanOrEqual(Math.floor(0.9 * 98))
        const change = (other: Group) => Math.abs(other.firstFrame - first[g].firstFrame) + Math.abs(other.firstFrame + other.frameCount - first[g].firstFrame - first[g].frameCount)
        moved.kept += change(group)
        moved.fresh += change(fresh[g])
        moved.all += group.frameCount
      })
    }
    expect(moved.kept).toBeLessThan(0.5 * moved.fresh)
    expect(moved.kept / moved.all).toBeLessThan(5e-4)
  })

  it('takes the new choice when a frame no longer lies inside, when too few are used, or when the old one leaks', () => {
    const first = cutAt(0).groups
    expect(spansOf(cutAt(0.1, { keep: first }).groups)).toEqual(spansOf(cutAt(0.1).groups))
    const short = first.map(group => ({ ...group, frameCount: 60 }))
    expect(spansOf(cutAt(0, { keep: short }).groups)).toEqual(spansOf(first))
    // With half the interval dark, 211.3 Hz leaks; of the allowed spans the worst must not be kept, a nearly best one may.
    const open = 0.011
    const best = cutAt(0, { exposureSeconds: open }).groups
    const error = (group: Group) => chooseWholePeriods({ startsSeconds: frameTimesSeconds.subarray(group.firstFrame, group.firstFrame + group.frameCount), exposureSeconds: open, frequencyHz: 211.3, depth: 0.9 }, 1).error
    const leaky = best.map(group => group.role === 'phase' ? { ...group, firstFrame: group.firstFrame + 1, frameCount: group.frameCount - 2 } : group)
    cutAt(0, { exposureSeconds: open, keep: leaky }).groups.forEach((group, g) => {
      const keepable = error(leaky[g]) <= 1.25 * error(best[g]) + 0.001
      if (group.role === 'phase') expect(spansOf([group])).toEqual(spansOf([keepable ? leaky[g] : best[g]]))
    })
    expect(leaky.some((group, g) => group.role === 'phase' && error(group) > 1.25 * error(best[g]) + 0.001)).toBe(true)
  })

  it('keeps ids when an earlier group of the same kind is gone', () => {
    const twice = regimes()
    twice.push({ ...twice[1], startSeconds: twice[9].endSeconds, endSeconds: twice[9].endSeconds + 2 })
    const cut = (list: Regime[], keep?: Group[]) => cutFrames({ regimes: list, alignment: { offsetSeconds: 0, driftPpm: 0 }, frameTimesSeconds, exposureSeconds, keep }).groups
    const first = cut(twice)
    expect(first.at(-1)!.id).toBe('l1-r3-ref-2')
    const gone = twice.map((regime, k) => k === 7 ? { ...regime, endSeconds: regime.startSeconds + 0.01 } : regime)
    expect(cut(gone).at(-1)!.id).toBe('l1-r3-ref')
    expect(cut(gone, first).at(-1)!.id).toBe('l1-r3-ref-2')
  })

  it('lets no frame lack more than a fifth of the guard or a tenth of an exposure', () => {
    expect(keepSlackSeconds(0.001, 0.02)).toBe(0.0002)
    expect(keepSlackSeconds(0.01, 0.005)).toBe(0.0005)
    expect(keepSlackSeconds(0, 0.02)).toBe(0)
  })
})

describe('frames whose time is unknown', () => {
  it('are in no group: the larger side stays when it is half of the group or more', () => {
    const whole = cutAt(0).groups
    const target = whole[2]
    const excluded = [{ firstFrame: target.firstFrame + 25, frameCount: 4 }]
    const { groups, flags } = cutAt(0, { excluded })
    expect(flags).toEqual([])
    expect(groups[2].firstFrame).toBeGreaterThanOrEqual(target.firstFrame + 29)
    expect(groups[2].frameCount).toBeGreaterThan(60)
    expect(spansOf(groups.filter((_, g) => g !== 2))).toEqual(spansOf(whole.filter((_, g) => g !== 2)))
  })

  it('spoil a repetition of which less than half a group is left in one piece: flagged and not accepted', () => {
    const target = cutAt(0).groups[5]
    const middle = target.firstFrame + Math.floor(target.frameCount / 2)
    const { groups, flags } = cutAt(0, { excluded: [{ firstFrame: middle - 5, frameCount: 10 }] })
    expect(flags.map(flag => flag.code)).toEqual(['frame-loss'])
    expect(groups.filter(group => !group.accepted).map(group => group.id)).toEqual(['l1-r2-ref', 'l1-r2-p0', 'l1-r2-p90'])
    expect(groups.filter(group => group.flags.some(flag => flag.code === 'frame-loss')).map(group => group.repetition)).toEqual([2, 2, 2])
    expect(groups.every(group => group.firstFrame + group.frameCount <= middle - 5 || group.firstFrame >= middle + 5)).toBe(true)
  })

  it('only shorten a dark group, and take an earlier choice away', () => {
    const first = cutAt(0).groups
    const middle = first[0].firstFrame + Math.floor(first[0].frameCount / 2)
    const { groups, flags } = cutAt(0, { keep: first, excluded: [{ firstFrame: middle, frameCount: 1 }] })
    expect(flags).toEqual([])
    expect(groups[0].accepted).toBe(true)
    expect(groups[0].frameCount).toBe(first[0].frameCount - 1 - Math.min(middle - first[0].firstFrame, first[0].firstFrame + first[0].frameCount - middle - 1))
  })

  it('leave the longest unbroken part, overlapping and unordered exclusions included', () => {
    const uniform = seededUniform(8)
    for (let trial = 0; trial < 200; trial++) {
      const excluded = Array.from({ length: Math.floor(4 * uniform()) }, () => ({ firstFrame: Math.floor(40 * uniform()), frameCount: Math.floor(8 * uniform()) }))
      const free = Array.from({ length: 20 }, (_, k) => !excluded.some(({ firstFrame, frameCount }) => 10 + k >= firstFrame && 10 + k < firstFrame + frameCount))
      const longest = Math.max(...free.map(Number).join('').split('0').map(part => part.length))
      const left = withoutExcluded(10, 20, excluded)
      expect(left.count).toBe(longest)
      expect(left.touched).toBe(free.includes(false))
      expect(free.slice(left.first - 10, left.first - 10 + left.count).every(Boolean)).toBe(true)
    }
  })
})

describe('the contract of groups', () => {
  it('takes groups with and without distortion', () => {
    const [group] = cutAt(0).groups
    const { distortion, ...without } = group
    expect(distortion).toBeNull()
    expect(groupSchema.parse(without)).toEqual(without)
    expect(groupSchema.parse({ ...group, distortion: 0.02 }).distortion).toBe(0.02)
  })
})

describe('whole periods of long groups', () => {
  const run = (frames: number, frequencyHz: number) => ({ startsSeconds: Float64Array.from({ length: frames }, (_, k) => k / 50), exposureSeconds: 1 / 60, frequencyHz, depth: 0.9 })

  it.each([206.1, 200.013, 249.99])('of 60 000 frames are found among two million choices at most, and leak 1e-5 or less at %s Hz', (frequencyHz) => {
    const frames = run(60_000, frequencyHz)
    const choice = chooseWholePeriods(frames)
    expect(choice.count).toBeGreaterThanOrEqual(54_000)
    expect(choice.error).toBeLessThan(1.05e-5)
  })

  it('of 14 000 frames and fewer are the best of all choices', () => {
    const frames = run(400, 203.7)
    const { error } = chooseWholePeriods(frames)
    let least = Number.POSITIVE_INFINITY
    for (let count = 360; count <= 400; count++) {
      for (let first = 0; first + count <= 400; first++) least = Math.min(least, chooseWholePeriods({ ...frames, startsSeconds: frames.startsSeconds.subarray(first, first + count) }, 1).error)
    }
    expect(Math.max(error, 1e-5)).toBeCloseTo(Math.max(least, 1e-5), 12)
  })
})
