import { describe, expect, it } from 'vitest'
import { describe as describeTake } from '../../../scripts/demo/files'
import { demoCampaigns, demoTakes } from '../../../scripts/demo/scenarios'
import { classifyFrames, FrameRenderer, groupTruths, makeTimeline } from '../../support/forward'
import { toRecordSeconds } from '../../support/forward/timeline'
import { acquisitionCreateSchema, campaignCreateSchema } from '../../../shared/schemas/campaigns'

const takes = demoTakes()
const take = (key: string) => takes.find(one => one.key === key)!

describe('demo takes', () => {
  it('can be registered as they are', () => {
    for (const campaign of demoCampaigns) expect(campaignCreateSchema.safeParse(campaign).success).toBe(true)
    for (const one of takes) expect(acquisitionCreateSchema.safeParse({ ...describeTake(one), campaignId: 'c1' }).success).toBe(true)
    expect(new Set(takes.map(({ campaign }) => campaign))).toEqual(new Set(demoCampaigns.map(({ key }) => key)))
  })

  it('hold every planned repetition wholly inside clip and record', () => {
    for (const one of takes) {
      const groups = groupTruths(one.scenario).filter(({ role }) => role !== 'dark')
      const planned = describeTake(one).plan.reduce((sum, { repetitions }) => sum + repetitions, 0)
      expect(groups).toHaveLength(3 * planned)
      for (const group of groups) expect(group.frameCount).toBeGreaterThan(35)
    }
  })

  it('move the camera for the whole of the third repetition and for nothing else', () => {
    const { scenario } = take('bumped')
    const [there, back] = scenario.camera.bumps.map(({ atClipSeconds }) => toRecordSeconds(scenario, atClipSeconds))
    for (const group of groupTruths(scenario)) {
      if (group.repetition === 3 && group.role !== 'dark') expect(group.startSeconds >= there! - 1e-9 && group.endSeconds <= back! + 1e-9).toBe(true)
      else expect(group.endSeconds <= there! + 1e-9 || group.startSeconds >= back! - 1e-9).toBe(true)
    }
  })

  it('stay below white and above black in every frame', () => {
    for (const key of ['untouched', 'bumped', 'uploading']) {
      const { scenario } = take(key)
      const renderer = new FrameRenderer(makeTimeline(scenario))
      for (const kind of ['dark', 'reference', 'phase']) {
        const light = renderer.light(classifyFrames(scenario).find(frame => frame.kind === kind)!.frame)
        const noise = Math.hypot(scenario.camera.readNoise, scenario.camera.shotNoise)
        expect(light.every(value => value < 1 - 4 * noise && value > 4 * scenario.camera.readNoise)).toBe(true)
      }
    }
  })
})
