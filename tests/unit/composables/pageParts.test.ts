import { beforeAll, describe, expect, it } from 'vitest'
import { bandLook, groupName } from '../../../composables/bands'
import { bodyOf, emptyForm, patchError, planError, planRow, settingsOf } from '../../../composables/acquisitionForm'
import { envelopePath } from '../../../composables/envelopePath'
import * as format from '../../../composables/format'
import { imageChoices } from '../../../composables/frameSetImages'
import { jobReason, matchesJob } from '../../../composables/jobWords'
import { laneAxis } from '../../../composables/laneAxis'
import { formatAgo, formatTime } from '../../../composables/useClock'
import { acquisitionCreateSchema } from '../../../shared/schemas/campaigns'
import type { Group } from '../../../shared/measurement'
import type { Job } from '../../../shared/schemas/results'
import * as bands from '../../../composables/bands'
import { stubAutoImports } from './autoImports'

beforeAll(() => stubAutoImports(format, bands))
const group = (role: Group['role'], lampPhaseDeg: number | null = null): Group => ({ id: 'g', line: 1, frequencyHz: 412, repetition: 2, role, lampPhaseDeg, depth: null, firstFrame: 12, frameCount: 59, accepted: true, flags: [] })

describe('bands', () => {
  it('has 0° and 90° by the nearer one, whatever the sign', () => {
    expect([0.4, -3, 178, -179, 44].map(phase => bandLook('phase', phase).word)).toEqual(['0°', '0°', '0°', '0°', '0°'])
    expect([90.2, -88, 46, 134].map(phase => bandLook('phase', phase).word)).toEqual(['90°', '90°', '90°', '90°'])
  })
  it('hatches dark and nothing else', () => {
    expect([bandLook('dark', null), bandLook('reference', null), bandLook('phase', 0)].map(look => look.hatched)).toEqual([true, false, false])
    expect(groupName(group('phase', 90))).toBe('repetition 2, phase 90°')
  })
})

describe('images of a frame set', () => {
  it('offers the solution and the mean of every group, in light', () => {
    const choices = imageChoices({ groups: [group('reference'), { ...group('dark'), frameCount: 0 }] })
    expect(choices.map(choice => choice.name)).toEqual(['scene', 'p', 'q', 'noise', 'g'])
    expect(choices.at(-1)!.scale * 59 * 50_000).toBeCloseTo(1, 12)
  })
})

describe('the registration form', () => {
  it('sends what the API accepts, leaving empty rows out', () => {
    const form = { ...emptyForm('c1'), title: 'sweep A', guardMilliseconds: 2, plan: [planRow(412, 3), planRow(), planRow(731)] }
    const parsed = acquisitionCreateSchema.parse(bodyOf(form))
    expect(parsed).toMatchObject({ campaignId: 'c1', title: 'sweep A', guardSeconds: 0.002, plan: [{ frequencyHz: 412, repetitions: 3 }, { frequencyHz: 731 }], cameraProfileId: null })
  })
  it('takes settings back without binary dust', () => {
    expect(settingsOf({ cameraProfileId: null, frameExposureSeconds: 0.02, transfer: 'bt709', range: 'limited', millimetresPerPixel: null, guardSeconds: 0.0013, autoRun: true, lampPatch: null }).guardMilliseconds).toBe(1.3)
  })
  it('takes a lamp patch as four numbers and says what else it could not be', () => {
    const sent = (lampPatch: string) => acquisitionCreateSchema.safeParse(bodyOf({ ...emptyForm('c1'), title: 'a', lampPatch }))
    expect(sent('120, 40 64;48').data?.lampPatch).toEqual({ left: 120, top: 40, width: 64, height: 48 })
    expect(sent(' ').data?.lampPatch).toBeNull()
    expect(sent('120, 40, 64').error?.issues[0]?.message).toMatch(/four whole numbers/)
    expect(patchError({ 'lampPatch.width': 'Too small.' })).toBe('Too small.')
    expect(patchError({ title: 'x' })).toBeUndefined()
  })
  it('says which line of the plan is wrong', () => {
    expect(planError({ 'plan.2.frequencyHz': 'Give the frequency in Hz, above 0.' })).toBe('Line 3: Give the frequency in Hz, above 0.')
    expect(planError({ title: 'x' })).toBeUndefined()
  })
})

describe('jobs in words', () => {
  const job = (id: string, more: Partial<Job> = {}) => ({ id, stage: 'sum', state: 'waiting', attempts: 0, message: null, runnerName: null, acquisitionNumber: 12, acquisitionTitle: 'sweep A', campaignName: 'Fan shroud', ...more } as Job)
  it('names the place in the line, and that the queue is paused', () => {
    expect(jobReason(job('b'), [job('a'), job('b')], false)).toBe('Second in line')
    expect(jobReason(job('a'), [job('a')], true)).toBe('The queue is paused. First in line')
  })
  it('keeps the job\'s own words otherwise', () => {
    expect(jobReason(job('a', { state: 'failed', message: 'The file ends early.' }), [], false)).toBe('The file ends early.')
  })
  it('is found by all words of the search, in any order', () => {
    expect(matchesJob(job('a'), 'shroud 12')).toBe(true)
    expect(matchesJob(job('a'), 'shroud 13')).toBe(false)
  })
})

describe('plots', () => {
  it('draws an envelope as one closed outline through every extreme', () => {
    expect(envelopePath([0, 0], [1, 0.5], 0, 1, 10)).toBe('M0,1.00L1,5.00L1,9.00L0,9.00Z')
    expect(envelopePath([], [], 0, 1, 10)).toBe('')
  })
  it('shows as much of the past as there is, a day at most', () => {
    const now = Date.parse('2026-03-01T12:00:00Z')
    const hours = (age: number | null) => (now - laneAxis(now, age === null ? null : now - age * 3.6e6).fromMs) / 3.6e6
    expect([null, 0.1, 0.9, 2.5, 7, 100].map(hours)).toEqual([0.25, 0.25, 1, 3, 8, 24])
    expect(laneAxis(now, now - 7 * 3.6e6).ticksMs.map(tick => new Date(tick).getUTCMinutes())).toEqual(Array(9).fill(0))
  })
})

describe('times', () => {
  const now = Date.parse('2026-03-03T12:00:00Z')
  it('shortens by how long ago, in the reader\'s zone', () => {
    expect(formatTime('2026-03-03T09:05:00Z', 'Europe/Berlin', now)).toBe('10:05')
    expect(formatTime('2026-01-28T09:05:00Z', 'UTC', now)).toBe('28 Jan 09:05')
    expect(formatTime('2024-01-28T09:05:00Z', 'UTC', now)).toBe('28 Jan 2024')
  })
  it('does not break on a zone it does not know', () => {
    expect(formatTime('2026-03-03T09:05:00Z', 'Nowhere/Land', now)).toBe('09:05')
  })
  it('says how long ago', () => {
    expect(formatAgo('2026-03-03T11:59:58Z', now)).toBe('2\u00A0s ago')
    expect(formatAgo(null, now)).toBe('never')
  })
})
