import type { Group, GroupRole } from '#shared/measurement'

export interface BandLook { word: string, colour: string, wash: string, hatched: boolean }

/** The fixed meaning of band colours. A phase band is 0° or 90° by which its lamp phase is nearer to. */
export function bandLook(role: GroupRole, lampPhaseDeg: number | null): BandLook {
  if (role === 'dark') return { word: 'dark', colour: 'var(--band-dark)', wash: 'var(--band-dark-wash)', hatched: true }
  if (role === 'reference') return { word: 'reference', colour: 'var(--band-reference)', wash: 'var(--band-reference-wash)', hatched: false }
  return isQuadrature(lampPhaseDeg)
    ? { word: '90°', colour: 'var(--band-90)', wash: 'var(--band-90-wash)', hatched: false }
    : { word: '0°', colour: 'var(--band-0)', wash: 'var(--band-0-wash)', hatched: false }
}

/** Nearer to ±90° than to 0° or 180°. */
function isQuadrature(lampPhaseDeg: number | null): boolean {
  return lampPhaseDeg !== null && Math.abs(Math.sin(lampPhaseDeg * Math.PI / 180)) > Math.SQRT1_2
}

export function groupName(group: Group): string {
  const look = bandLook(group.role, group.lampPhaseDeg)
  const what = group.role === 'phase' ? `phase ${look.word}` : look.word
  return group.role === 'dark' ? `${what}, frames ${group.firstFrame}–${group.firstFrame + group.frameCount - 1}` : `repetition ${group.repetition}, ${what}`
}
