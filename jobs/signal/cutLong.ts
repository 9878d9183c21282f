import { maximumFramesPerSum } from '../imaging/accumulate'
import type { Group } from '../../shared/measurement'

/** A group longer than a uint32 sum can hold exactly, as consecutive groups of nearly equal length; others as they are. */
export function splitLong(group: Group, most = maximumFramesPerSum): Group[] {
  const parts = Math.ceil(group.frameCount / most)
  if (parts <= 1) return [group]
  const edge = (part: number) => Math.floor(part * group.frameCount / parts)
  return Array.from({ length: parts }, (_, part) => ({ ...group, flags: [...group.flags], firstFrame: group.firstFrame + edge(part), frameCount: edge(part + 1) - edge(part) }))
}
