import { writeFile } from 'node:fs/promises'
import { join } from 'node:path'
import type { ClipFacts, Group } from '../../shared/measurement'
import { addFrame, assertSummable } from '../imaging/accumulate'
import { createLightTable } from '../media/transfer'
import { cutListOf } from './cutList'
import { decodeClip } from './decode'
import { factsOf } from './inputs'
import { defineStage } from './stage'

interface Payload {
  path: string
  clip: ClipFacts
  cutListVersion: number
  groups: Group[]
}

export const sumFileName = (groupId: string) => `sum-${groupId}`

/**
 * Adds every group's frames in linear light, exactly. Groups follow one another in the clip, so one image is in
 * memory at a time; each is written when its last frame has been added.
 */
export const sum = defineStage<Payload>({
  load(situation, store) {
    const { source, clip } = factsOf(situation, 'inspect')
    const { version, groups } = cutListOf(situation)
    return { path: store.localPath(source.fileKey), clip, cutListVersion: version, groups }
  },

  async run({ path, clip, cutListVersion, groups }, helpers) {
    const table = createLightTable(clip.transfer, clip.range, clip.bitDepth)
    const pixels = clip.width * clip.height
    const files: Record<string, string> = {}
    for (const group of groups) assertSummable(group.frameCount)
    const open = new Map<Group, Uint32Array>()
    const pending = groups.filter(group => group.frameCount > 0).sort((a, b) => a.firstFrame - b.firstFrame)
    const frameCount = await decodeClip(path, clip, helpers, async (luma, index) => {
      while (pending[0] && pending[0].firstFrame === index) open.set(pending.shift()!, new Uint32Array(pixels))
      for (const [group, image] of open) {
        addFrame(image, luma, table)
        if (index < group.firstFrame + group.frameCount - 1) continue
        open.delete(group)
        const name = sumFileName(group.id)
        files[name] = join(helpers.workDir, name)
        await writeFile(files[name], new Uint8Array(image.buffer))
      }
    })
    const used = groups.reduce((total, group) => total + group.frameCount, 0)
    return { state: 'done', message: `${groups.length} groups, ${used} of ${frameCount} frames added.`, facts: { cutListVersion, frameCount }, files, flags: [] }
  },
})
