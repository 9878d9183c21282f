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

const solved: ImageChoice[] = [
  { name: 'scene', label: 'Scene', map: 'gray', scale: 1 / countsPerLight, unit: 'light per lamp unit', explanation: 'The specimen at unit lamp signal, solved from all good repetitions.' },
  { name: 'p', label: 'p', map: 'split', scale: 1 / countsPerLight, unit: 'light per lamp unit', explanation: 'What moves with the cosine of the line: −∇s·Re U.' },
  { name: 'q', label: 'q', map: 'split', scale: 1 / countsPerLight, unit: 'light per lamp unit', explanation: 'What moves with the sine of the line: +∇s·Im U.' },
  { name: 'noise', label: 'Noise', map: 'ember', scale: 1 / countsPerLight, unit: 'light per lamp unit', explanation: 'Standard deviation of p and q from the scatter of the repetitions.' },
]

export function imageChoices(set: Pick<FrameSet, 'groups'>): ImageChoice[] {
  return [...solved, ...set.groups.filter(group => group.frameCount > 0).map(meanOf)]
}

function meanOf(group: Group): ImageChoice {
  return {
    name: group.id, label: groupName(group), map: 'gray', scale: 1 / (group.frameCount * countsPerLight), unit: 'light',
    explanation: `Mean linear light of ${countOf(group.frameCount, 'frame')} from frame ${group.firstFrame}; 1 is nominal white.${group.accepted ? '' : ' This group is left out of the solution.'}`,
  }
}
