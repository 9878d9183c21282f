import type { HomeItem } from '#shared/schemas/results'

/** What needs a person comes first, what only informs comes last. */
export const homeGroups: { title: string, kinds: HomeItem['kind'][] }[] = [
  { title: 'Needs a decision', kinds: ['failed', 'review', 'disk'] },
  { title: 'Not complete yet', kinds: ['upload', 'record missing'] },
  { title: 'New results', kinds: ['release', 'ready'] },
  { title: 'On its way', kinds: ['processing'] },
]

export const homeMarks: Record<HomeItem['kind'], { shape: MarkShape, colour: string }> = {
  'failed': { shape: 'cross', colour: 'var(--bad)' },
  'review': { shape: 'triangle', colour: 'var(--warn)' },
  'disk': { shape: 'triangle', colour: 'var(--warn)' },
  'upload': { shape: 'arrow', colour: 'var(--accent)' },
  'record missing': { shape: 'open triangle', colour: 'var(--warn)' },
  'release': { shape: 'flag', colour: 'var(--ok)' },
  'ready': { shape: 'tick', colour: 'var(--ok)' },
  'processing': { shape: 'bar', colour: 'var(--accent)' },
}
