import type { Flag, Group, PlanLine, Regime } from '../../shared/measurement'
import { wrapDegrees } from './sineFit'

const hertz = (frequencyHz: number) => `${Number(frequencyHz.toFixed(2))} Hz`

/** What a person should know about one group, from its regime and its frames. */
export function groupFlags(group: Group, regime: Regime, exposureSeconds: number, planned: boolean, hasPlan: boolean): Flag[] {
  const flags: Flag[] = [...regime.flags]
  const add = (code: string, severity: Flag['severity'], message: string) => flags.push({ code, severity, message })
  const periods = group.frameCount * exposureSeconds * group.frequencyHz
  if (group.frameCount < 5 || (group.role === 'phase' && periods < 10)) {
    add('group-too-short', 'warning', `Only ${group.frameCount} frames lie wholly inside this regime; hold the lamp longer or shorten the guard.`)
  }
  if (group.role !== 'phase') return flags
  if (hasPlan && !planned) add('unplanned-line', 'warning', `${hertz(group.frequencyHz)} is not in the plan; add the line or correct its frequency.`)
  if (group.depth !== null && group.depth < 0.5) {
    add('depth-shallow', 'warning', `The lamp is modulated by only ${Math.round(100 * group.depth)} %; the floor rises as the depth falls.`)
  }
  return flags
}

/** Flags that need a whole repetition: reference there, two phases there, a quarter period apart. */
export function repetitionFlags(groups: Group[]): Flag[] {
  const phases = groups.filter(group => group.role === 'phase')
  if (!phases.length) return []
  const { line, repetition, frequencyHz } = phases[0]
  const name = `line ${line} (${hertz(frequencyHz)}), repetition ${repetition}`
  const flags: Flag[] = []
  if (!groups.some(group => group.role === 'reference')) {
    flags.push({ code: 'reference-missing', severity: 'warning', message: `No reference belongs to ${name}; it can only be solved together with other repetitions.` })
  }
  if (phases.length === 1) {
    flags.push({ code: 'phase-missing', severity: 'warning', message: `Only one lamp phase was found in ${name}; the other quarter is missing.` })
    return flags
  }
  const turn = Math.abs(wrapDegrees(phases[1].lampPhaseDeg! - phases[0].lampPhaseDeg!))
  const error = Math.abs(turn - 90)
  if (error > 5) {
    const severity = error > 45 ? 'problem' : 'warning'
    const flag: Flag = { code: 'quarter-off', severity, message: `The lamp phases of ${name} lie ${turn.toFixed(1)}° apart instead of 90°; check the controller.` }
    flags.push(flag)
    phases[1].flags.push(flag)
  }
  return flags
}

/** Frames were lost inside of a repetition, and less than half of one of its groups is left in one piece. */
export function frameLossFlag(line: number, repetition: number): Flag {
  return { code: 'frame-loss', severity: 'warning', message: `Frames were lost in line ${line}, repetition ${repetition}, so it is left out; repeat it if too few repetitions remain.` }
}

/** What the plan asks for and the record does not hold. */
export function planFlags(groups: Group[], plan: PlanLine[]): Flag[] {
  const flags: Flag[] = []
  plan.forEach((entry, index) => {
    const line = index + 1
    const phases = groups.filter(group => group.line === line && group.role === 'phase')
    const repetitions = new Set(phases.map(group => group.repetition)).size
    if (!repetitions) {
      flags.push({ code: 'line-missing', severity: 'warning', message: `The planned line at ${hertz(entry.frequencyHz)} was not found; shoot it before the rig is taken down.` })
    } else if (entry.repetitions && repetitions < entry.repetitions) {
      flags.push({ code: 'repetition-missing', severity: 'warning', message: `${hertz(entry.frequencyHz)} has ${repetitions} of ${entry.repetitions} planned repetitions.` })
    }
  })
  return flags
}
