import { describe, expect, it } from 'vitest'
import { repetitionMotion } from '../../../jobs/imaging/cameraMotion'
import { inOrder, lineChecks, repetitionChecks, residualChecks, type CheckInput } from '../../../jobs/imaging/checks'
import { medianOf } from '../../../jobs/imaging/median'
import { proposeRejections } from '../../../jobs/imaging/rejections'
import { gramOfSums } from '../../../jobs/imaging/repetitionResiduals'
import { reviewRepetitions, type ReviewInput } from '../../../jobs/imaging/review'
import { estimateShift } from '../../../jobs/imaging/shift'
import { solveFrameSet } from '../../../jobs/imaging/solve'
import { checkDefinitions, type CheckId, type CheckResult } from '../../../shared/checks'
import type { Group } from '../../../shared/measurement'
import { normal, random, WaveTexture } from './pictures'

const [width, height] = [96, 80]
const frameCount = 50
const texture = new WaveTexture(21)

interface Bump {
  repetition: number
  /** Position in the repetition: 0 reference, 1 and 2 phases. */
  from: number
  dx: number
  /** Lasts until the end, else for that group only. */
  stays: boolean
}

type Line = Omit<CheckInput, 'motion'> & { sums: Uint32Array[] }

/** A line of repetitions that pass: reference, sine, cosine; a bump moves the camera. */
function line(repetitions: number, bumps: Bump[] = []): Line {
  const next = random(4)
  const groups: Group[] = []
  const integrals: number[] = []
  const sums: Uint32Array[] = []
  for (let repetition = 1; repetition <= repetitions; repetition++) {
    for (let kind = 0; kind < 3; kind++) {
      const place = groups.length
      const dx = bumps.reduce((sum, bump) => (bump.stays ? place >= 3 * (bump.repetition - 1) + bump.from : repetition === bump.repetition && kind === bump.from) ? sum + bump.dx : sum, 0)
      const level = 2 * frameCount
      const [c, s] = [kind === 2 ? 0.8 * level / 2 : 0, kind === 1 ? 0.8 * level / 2 : 0]
      const motion = (c - s) / level * 0.4
      groups.push({
        id: `l1-r${repetition}-${kind}`, line: 1, frequencyHz: 400, repetition, role: kind ? 'phase' : 'reference', lampPhaseDeg: kind ? (kind - 1) * 90 : null,
        depth: kind ? 0.8 : null, firstFrame: place * frameCount, frameCount, accepted: true, flags: [],
      })
      integrals.push(level, c, s)
      sums.push(texture.picture(width, height, dx + motion, 0).map(value => Math.max(0, value + 600 * normal(next))))
    }
  }
  const frames = groups.length * frameCount
  return { groups, integrals: Float64Array.from(integrals), sums, meter: { light: new Float64Array(frames).fill(0.4), clipped: new Float64Array(frames), black: new Float64Array(frames).fill(0.01) } }
}

/** Checks that do not depend on the solution. */
async function fixed(input: Line): Promise<CheckResult[]> {
  return repetitionChecks({ ...input, motion: await repetitionMotion(input.groups, (a, b) => estimateShift(input.sums[a], input.sums[b], width, height)) })
}

async function all(input: Line): Promise<CheckResult[]> {
  const { conditionNumber, noise, degreesOfFreedom } = solveFrameSet({ ...input, width, height, roles: input.groups.map(group => group.role), frames: input.groups.map(group => group.frameCount) })
  return inOrder(await fixed(input), residualChecks(input.groups, input.integrals, gramOfSums(input.sums)), lineChecks(conditionNumber, degreesOfFreedom > 0 ? medianOf(noise) / medianOf(input.sums[0]) : null))
}

const review = async (input: Line, decisions: Partial<ReviewInput> = {}) => reviewRepetitions({ groups: input.groups, integrals: input.integrals, fixedChecks: await fixed(input), gram: gramOfSums(input.sums), ...decisions })

const failed = (results: CheckResult[]) => results.filter(({ passed }) => !passed).map(({ checkId, repetition }) => `${checkId} ${repetition}`)
const valueOf = (results: CheckResult[], id: CheckId, repetition: number | null) => results.find(result => result.checkId === id && result.repetition === repetition)!.value!

describe('checks of a line', () => {
  it('all pass for good repetitions, each with its value and limit', async () => {
    const results = await all(line(3))
    expect(failed(results)).toEqual([])
    expect(results.filter(({ repetition }) => repetition === 2).map(({ checkId }) => checkId)).toEqual(['clipped-share', 'black-share', 'level-drift', 'light-drift', 'depth', 'quadrature-error', 'whole-period-error', 'camera-motion', 'residual'])
    expect(results.filter(({ repetition }) => repetition === null).map(({ checkId }) => checkId)).toEqual(['conditioning', 'noise'])
    for (const { checkId, value, limit, unit } of results) {
      expect(value).not.toBeNull()
      expect([limit, unit]).toEqual([checkDefinitions[checkId as CheckId].limit, checkDefinitions[checkId as CheckId].unit])
    }
  })

  it('measure camera motion within 0.01 px and fail only the repetition that was bumped', async () => {
    const results = await fixed(line(4, [{ repetition: 3, from: 0, dx: 0.2, stays: false }]))
    expect(failed(results)).toEqual(['camera-motion 3'])
    expect(valueOf(results, 'camera-motion', 3)).toBeCloseTo(0.2, 2)
    for (const good of [1, 2, 4]) expect(valueOf(results, 'camera-motion', good)).toBeLessThan(0.02)
  })

  it('see a bump between the reference and its phases', async () => {
    expect(failed(await fixed(line(4, [{ repetition: 2, from: 2, dx: 0.15, stays: false }])))).toEqual(['camera-motion 2'])
  })

  it('blame the fewer when the camera stays where it was bumped to', async () => {
    expect(failed(await fixed(line(5, [{ repetition: 2, from: 1, dx: -0.4, stays: true }])))).toEqual(['camera-motion 1', 'camera-motion 2'])
  })

  it('do not take the motion seen under the two phases for camera motion', async () => {
    expect(valueOf(await fixed(line(2)), 'camera-motion', 1)).toBeLessThan(0.02)
  })

  it('give both of two repetitions their distance, as nobody can tell which one moved', async () => {
    expect(failed(await fixed(line(2, [{ repetition: 2, from: 0, dx: 0.3, stays: true }])))).toEqual(['camera-motion 1', 'camera-motion 2'])
  })

  it('fail a repetition whose pictures cannot be matched at all', async () => {
    const input = line(3)
    const other = new WaveTexture(99)
    const sums = input.sums.map((sum, g) => g >= 6 ? other.picture(width, height, 3 * g) : sum)
    expect((await fixed({ ...input, sums })).find(({ checkId, repetition }) => checkId === 'camera-motion' && repetition === 3)!.passed).toBe(false)
  })

  it('find clipping, automatic exposure, shallow and wrong lamp, part periods', async () => {
    const input = line(3)
    const [clipped, light] = [Float64Array.from(input.meter.clipped), Float64Array.from(input.meter.light)]
    clipped.fill(0.004, 150, 200)
    light.fill(0.36, 350, 400)
    const integrals = input.integrals.slice()
    integrals[1] = 4
    const groups = input.groups.map((group, g) => ({ ...group, distortion: g === 8 ? 0.12 : g % 3 ? 0.01 : null, ...g === 4 ? { depth: 0.3, lampPhaseDeg: 20 } : {} }))
    const results = await fixed({ ...input, groups, integrals, meter: { ...input.meter, clipped, light } })
    expect(failed(results).sort()).toEqual(['clipped-share 2', 'depth 2', 'distortion 3', 'light-drift 3', 'quadrature-error 2', 'whole-period-error 1'])
    expect(valueOf(results, 'clipped-share', 2)).toBeCloseTo(0.4, 9)
    expect(valueOf(results, 'quadrature-error', 2)).toBeCloseTo(20, 9)
    expect(valueOf(results, 'light-drift', 3)).toBeCloseTo(100 * 0.04 / (1.16 / 3), 6)
  })

  it('take ambient light off before light is held against the record', async () => {
    const input = line(2)
    const dark: Group = { ...input.groups[0], id: 'dark', role: 'dark', firstFrame: 300, frameCount: 10 }
    const light = Float64Array.from({ length: 310 }, (_, i) => i >= 300 ? 0.1 : i >= 50 && i < 100 ? 0.1 + 0.33 : 0.1 + 0.3)
    const integrals = Float64Array.from([...input.integrals, 0, 0, 0])
    integrals[3] *= 1.1
    const shares = new Float64Array(310)
    const results = await fixed({ ...input, groups: [...input.groups, dark], integrals, sums: [...input.sums, new Uint32Array(width * height)], meter: { light, clipped: shares, black: shares } })
    expect(valueOf(results, 'light-drift', 1)).toBeCloseTo(0, 6)
    expect(valueOf(results, 'level-drift', 1)).toBeGreaterThan(5)
  })

  it('say why something could not be measured', async () => {
    const results = await all(line(1))
    expect(results.find(({ checkId }) => checkId === 'camera-motion')).toMatchObject({ value: null, passed: true, message: expect.stringMatching(/no other repetition/) })
    expect(results.find(({ checkId }) => checkId === 'noise')).toMatchObject({ value: null, passed: true })
  })
})

describe('proposed rejections', () => {
  const bumped = (repetitions: number, repetition: number) => fixed(line(repetitions, [{ repetition, from: 0, dx: 0.3, stays: false }]))

  it('reject the bumped repetition when two good ones remain', async () => {
    const { proposed, rejected, flags } = proposeRejections(await bumped(3, 2))
    expect({ proposed, rejected: rejected.map(({ repetition }) => repetition) }).toEqual({ proposed: [2], rejected: [2] })
    expect(flags).toEqual([{ code: 'repetition-rejected', severity: 'warning', message: expect.stringMatching(/^Repetition 2 was rejected\. Camera motion 0\.(29|3)\d* px, limit 0\.05 px\./) }])
  })

  it('ask a person when fewer than two would remain', async () => {
    const { proposed, rejected, flags } = proposeRejections(await fixed(line(2, [{ repetition: 2, from: 0, dx: 0.3, stays: false }])))
    expect(proposed).toEqual([1, 2])
    expect(rejected).toEqual([])
    expect(flags).toMatchObject([{ code: 'too-few-good-repetitions', severity: 'problem' }])
  })

  it('reject nothing for a check that only informs', async () => {
    const input = line(3)
    const clipped = new Float64Array(input.meter.clipped.length).fill(0.2)
    expect(proposeRejections(await fixed({ ...input, meter: { ...input.meter, clipped } }))).toEqual({ proposed: [], rejected: [], flags: [] })
  })
})

describe('review of a line', () => {
  const numbers = (list: { repetition: number }[]) => list.map(({ repetition }) => repetition)
  const accepted = (groups: Group[]) => [...new Set(groups.filter(group => group.accepted && group.role !== 'dark').map(group => group.repetition))]

  it('rejects two of four repetitions that were bumped to different places', async () => {
    const { rejected, groups, flags } = await review(line(4, [{ repetition: 2, from: 0, dx: 0.3, stays: false }, { repetition: 4, from: 0, dx: -0.2, stays: false }]))
    expect(numbers(rejected)).toEqual([2, 4])
    expect(accepted(groups)).toEqual([1, 3])
    expect(flags.map(({ code }) => code)).toEqual(['repetition-rejected', 'repetition-rejected'])
  })

  it('asks a person when two of four stand at one place and two at another', async () => {
    const { rejected, flags, groups } = await review(line(4, [{ repetition: 3, from: 0, dx: 0.3, stays: true }]))
    expect(rejected).toEqual([])
    expect(accepted(groups)).toEqual([1, 2, 3, 4])
    expect(flags).toMatchObject([{ code: 'too-few-good-repetitions', severity: 'problem', message: expect.stringMatching(/^Repetitions 1, 2, 3, 4 should be rejected, but only 0 good ones would remain/) }])
  })

  it('rejects what came before a bump in the middle of a repetition, and that repetition, but nothing after it', async () => {
    const { rejected } = await review(line(4, [{ repetition: 2, from: 2, dx: 0.3, stays: true }]))
    expect(numbers(rejected)).toEqual([1, 2])
  })

  it('finds by its residual one of three repetitions that disagrees without having moved', async () => {
    const input = line(3)
    input.sums[5] = input.sums[5].map((value, i) => value + 8000 * Math.round(Math.sin(i % width / 9)))
    const { rejected, checks } = await review(input)
    expect(failed(checks)).toEqual(['residual 2'])
    expect(numbers(rejected)).toEqual([2])
  })

  it('leaves one and two repetitions alone, and says why there is no residual', async () => {
    for (const count of [1, 2]) {
      const { rejected, flags, checks } = await review(line(count))
      expect([rejected, flags]).toEqual([[], []])
      expect(checks.find(({ checkId }) => checkId === 'residual')).toMatchObject({ value: null, passed: true, message: expect.stringMatching(/Two other accepted repetitions/) })
    }
  })

  it('does not take the little scatter of dark groups for that of lit ones', async () => {
    const input = line(2)
    const next = random(9)
    const darks = Array.from({ length: 3 }, (_, k): Group => ({ ...input.groups[0], id: `dark-${k}`, role: 'dark', firstFrame: 300 + 10 * k, frameCount: 10 }))
    const longer = (column: ArrayLike<number>) => Float64Array.from({ length: 330 }, (_, i) => column[i] ?? 0)
    const sums = [...input.sums, ...darks.map(() => Uint32Array.from({ length: width * height }, () => 100 + 3 * next()))]
    const { rejected, checks } = await review({ ...input, groups: [...input.groups, ...darks], integrals: Float64Array.from([...input.integrals, ...darks.flatMap(() => [0, 0, 0])]), sums, meter: { light: longer(input.meter.light), clipped: longer([]), black: longer([]) } })
    expect(rejected).toEqual([])
    expect(checks.filter(({ checkId }) => checkId === 'residual').map(({ value }) => value)).toEqual([null, null])
  })

  it('keeps the dark groups of a rejected repetition', async () => {
    const input = line(3, [{ repetition: 1, from: 0, dx: 0.3, stays: false }])
    const dark: Group = { ...input.groups[0], id: 'dark', role: 'dark', firstFrame: 450, frameCount: 10 }
    const longer = (column: ArrayLike<number>) => Float64Array.from({ length: 460 }, (_, i) => column[i] ?? 0)
    const { rejected, groups } = await review({ ...input, groups: [...input.groups, dark], integrals: Float64Array.from([...input.integrals, 0, 0, 0]), sums: [...input.sums, new Uint32Array(width * height).map((_, i) => i % 7)], meter: { light: longer(input.meter.light), clipped: longer([]), black: longer([]) } })
    expect(numbers(rejected)).toEqual([1])
    expect(groups.filter(group => group.repetition === 1).map(({ id, accepted: used }) => [id, used])).toEqual([['l1-r1-0', false], ['l1-r1-1', false], ['l1-r1-2', false], ['dark', true]])
  })

  it('does not reject when what remains cannot be solved', async () => {
    const input = line(3, [{ repetition: 1, from: 0, dx: 0.3, stays: false }])
    const groups = input.groups.map((group, g) => g % 3 === 2 && g > 2 ? { ...group, accepted: false } : group)
    const { rejected, flags } = await review({ ...input, groups })
    expect(rejected).toEqual([])
    expect(flags).toMatchObject([{ code: 'too-few-good-repetitions', severity: 'problem', message: expect.stringMatching(/cannot be solved/) }])
  })

  it('lets a person’s decision stand, whatever the checks say', async () => {
    const input = line(4, [{ repetition: 2, from: 0, dx: 0.3, stays: false }])
    const { rejected, groups } = await review(input, { acceptedByPerson: [2], rejectedByPerson: [4] })
    expect(rejected).toEqual([])
    expect(accepted(groups)).toEqual([1, 2, 3])
  })

  it('blames the one repetition that shows another scene, even when it comes first', async () => {
    const input = line(4)
    const other = new WaveTexture(99)
    const { rejected } = await review({ ...input, sums: input.sums.map((sum, g) => g < 3 ? other.picture(width, height, 3 * g) : sum) })
    expect(numbers(rejected)).toEqual([1])
  })
})
