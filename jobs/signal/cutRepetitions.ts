import type { Regime } from '../../shared/measurement'
import type { LampLine } from './cutLines'
import { wrapDegrees } from './sineFit'

/** Where a regime belongs; `index` is its place in the list of regimes. */
export interface Placed {
  index: number
  line: LampLine
  repetition: number
}

interface Block {
  line: LampLine
  members: number[]
  repetition: number
}

const samePhaseDeg = 30

/** Runs of harmonic regimes of one line; a phase that comes again, or a reference between, begins the next. */
function harmonicBlocks(regimes: Regime[], lines: (LampLine | null)[]): Block[] {
  const blocks: Block[] = []
  let open: Block | null = null
  const counts = new Map<LampLine, number>()
  regimes.forEach((regime, index) => {
    if (regime.kind === 'constant') open = null
    const line = lines[index]
    if (!line) return
    const again = open?.members.some(member => Math.abs(wrapDegrees(regimes[member].lampPhaseDeg! - regime.lampPhaseDeg!)) < samePhaseDeg)
    if (!open || open.line !== line || again) {
      const repetition = (counts.get(line) ?? 0) + 1
      counts.set(line, repetition)
      open = { line, members: [], repetition }
      blocks.push(open)
    }
    open.members.push(index)
  })
  return blocks
}

/** References come behind their phases when the record begins with phases and ends with a reference. */
function referenceComesAfter(regimes: Regime[]): boolean {
  const lit = regimes.filter(regime => regime.kind !== 'dark')
  return lit.length > 1 && lit[0].kind === 'harmonic' && lit[lit.length - 1].kind === 'constant'
}

/**
 * Give every regime its line and repetition.
 *
 * A repetition is a run of harmonic regimes of one line; constant regimes belong to the run that follows them (or to the
 * one before, when the record begins with phases and ends with a reference), and a last one without successor to the last
 * run. Dark regimes belong to the repetition of the next lit regime, or to the last one.
 *
 * @returns nothing for records without harmonic regimes
 */
export function placeRegimes(regimes: Regime[], lines: (LampLine | null)[]): Placed[] {
  const blocks = harmonicBlocks(regimes, lines)
  if (!blocks.length) return []
  const after = referenceComesAfter(regimes)
  const home = new Map<number, Block>()
  for (const block of blocks) for (const member of block.members) home.set(member, block)
  const following = (index: number) => blocks.find(block => block.members[0] > index)
  const preceding = (index: number) => blocks.findLast(block => block.members[block.members.length - 1] < index)
  regimes.forEach((regime, index) => {
    if (regime.kind !== 'constant') return
    home.set(index, (after ? preceding(index) ?? following(index) : following(index) ?? preceding(index))!)
  })
  regimes.forEach((regime, index) => {
    if (regime.kind !== 'dark') return
    const next = regimes.findIndex((other, k) => k > index && other.kind !== 'dark')
    home.set(index, next >= 0 ? home.get(next)! : blocks[blocks.length - 1])
  })
  return regimes.map((_, index) => ({ index, line: home.get(index)!.line, repetition: home.get(index)!.repetition }))
}
