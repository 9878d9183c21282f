import type { Group } from '../../shared/measurement'

/** 90° steps where the lamp keeps them (within 20°), else tens of degrees, in 0…359. */
function phaseName(lampPhaseDeg: number): string {
  const quarter = Math.round(lampPhaseDeg / 90) * 90
  const rounded = Math.abs(lampPhaseDeg - quarter) <= 20 ? quarter : Math.round(lampPhaseDeg / 10) * 10
  return `p${((rounded % 360) + 360) % 360}`
}

function stemOf(group: Group): string {
  const part = group.role === 'phase' ? phaseName(group.lampPhaseDeg!) : group.role === 'dark' ? 'dark' : 'ref'
  return `l${group.line}-r${group.repetition}-${part}`
}

/**
 * Give groups their ids: `l1-r2-p90`, `l1-r2-ref`, `l1-r2-dark`, with `-2`, `-3` for further ones of a kind in order.
 *
 * @param earlier the group of an earlier cut that each group continues: its id is kept when it says the same, so that a
 *   second one of a kind does not become the first when that one is gone
 */
export function nameGroups(groups: Group[], earlier: ReadonlyMap<Group, Group> = new Map()): void {
  const taken = new Set<string>()
  for (const group of groups) {
    const id = earlier.get(group)?.id
    const stem = stemOf(group)
    if (!id || taken.has(id) || (id !== stem && !/^-\d+$/.test(id.startsWith(stem) ? id.slice(stem.length) : ''))) continue
    taken.add(group.id = id)
  }
  for (const group of groups) {
    if (group.id) continue
    const stem = stemOf(group)
    let id = stem
    for (let count = 2; taken.has(id); count++) id = `${stem}-${count}`
    taken.add(group.id = id)
  }
}
