import type { Group } from '#shared/measurement'
import type { FrameSet } from '#shared/schemas/results'

/** Sums count `round(50000·E)` a frame (shared/measurement). */
const countsPerLight = 50_000

export interface ImageChoice {
  name: string
  label: string
  map: ColourMapName
  /** Stored value times this is what the page shows. */
  scale: number
  unit: string
  explanation: string
}

const perLamp = { scale: 1 / countsPerLight, unit: 'light per lamp unit' }
const solved: ImageChoice[] = [
  { name: 'scene', label: 'Scene', map: 'gray', ...perLamp, explanation: 'The specimen at unit lamp signal, solved from all good repetitions.' },
  { name: 'p', label: 'p', map: 'split', ...perLamp, explanation: 'What moves with the cosine of the line: −∇s·Re U.' },
  { name: 'q', label: 'q', map: 'split', ...perLamp, explanation: 'What moves with the sine of the line: +∇s·Im U.' },
]

export function imageChoices(set: Pick<FrameSet, 'groups'>): ImageChoice[] {
  return [...solved, noiseOf(set.groups), ...set.groups.filter(group => group.frameCount > 0).map(meanOf)]
}

/** Stored is the deviation of one group's sum; shown is that of a mean frame of a group as long as most. */
function noiseOf(groups: Group[]): ImageChoice {
  const counts = groups.filter(group => group.role !== 'dark' && group.accepted && group.frameCount > 0).map(group => group.frameCount).sort((a, b) => a - b)
  const frames = counts[Math.floor(counts.length / 2)] ?? 1
  return { name: 'noise', label: 'Noise', map: 'ember', scale: 1 / (countsPerLight * frames), unit: 'light', explanation: `Standard deviation of the mean light of a group of ${countOf(frames, 'frame')}, from the scatter of the repetitions.` }
}

function meanOf(group: Group): ImageChoice {
  return {
    name: group.id, label: groupName(group), map: 'gray', scale: 1 / (group.frameCount * countsPerLight), unit: 'light',
    explanation: `Mean linear light of ${countOf(group.frameCount, 'frame')} from frame ${group.firstFrame}; 1 is nominal white.${group.accepted ? '' : ' This group is left out of the solution.'}`,
  }
}
