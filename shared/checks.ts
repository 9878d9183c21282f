/**
 * What is checked on every repetition, with its limit and the reason for it. The check stage, the frame set page
 * and the tests read this one table.
 */

export interface CheckDefinition {
  label: string
  unit: string
  limit: number
  /** The side of the limit on which a value is good. */
  direction: 'at-most' | 'at-least'
  /** Of one repetition, or of the line with all its accepted repetitions. */
  scope: 'repetition' | 'line'
  /** Why the limit matters, as a sentence that ends in what to do. */
  reason: string
  /** Whether a repetition that fails is proposed for rejection. */
  rejects: boolean
}

export const checkDefinitions = {
  'clipped-share': { label: 'Clipped pixels', unit: '%', limit: 0.1, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The light of clipped pixels is unknown, so their sums are too low. Close the iris or dim the lamp.' },
  'black-share': { label: 'Black pixels', unit: '%', limit: 5, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'Light below black is cut off, so dark pixels show too little motion. Raise the light or the camera’s black level.' },
  'level-drift': { label: 'Lamp level drift', unit: '%', limit: 5, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The mean lamp signal differs between reference and phases; the solution allows for it, but check that the lamp has warmed up.' },
  'light-drift': { label: 'Light against record', unit: '%', limit: 2, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The light in the frames does not follow the recorded lamp signal from group to group. Look for automatic exposure, ambient light or a photodiode that has moved.' },
  'depth': { label: 'Modulation depth', unit: '%', limit: 50, direction: 'at-least', scope: 'repetition', rejects: false, reason: 'A shallow modulation raises the floor. Drive the lamp deeper.' },
  'distortion': { label: 'Lamp distortion', unit: '%', limit: 5, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The lamp’s overtones pick up motion at multiples of the line. Check the lamp controller.' },
  'quadrature-error': { label: 'Quadrature error', unit: '°', limit: 10, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The phase groups are not a quarter period apart; the solution allows for it, at the price of noise. Check the lamp’s phase setting.' },
  'whole-period-error': { label: 'Whole-period error', unit: '%', limit: 2, direction: 'at-most', scope: 'repetition', rejects: false, reason: 'The groups do not cover whole lamp periods, so light leaks from one part of the motion into the other. Move the boundaries or expose longer.' },
  'camera-motion': { label: 'Camera motion', unit: 'px', limit: 0.05, direction: 'at-most', scope: 'repetition', rejects: true, reason: 'Camera or specimen moved against the other repetitions. Reject the repetition, and find what was touched.' },
  'residual': { label: 'Residual against the other repetitions', unit: '×', limit: 3, direction: 'at-most', scope: 'repetition', rejects: true, reason: 'This repetition disagrees with the others. Reject it unless you know why.' },
  'conditioning': { label: 'Condition number', unit: '', limit: 30, direction: 'at-most', scope: 'line', rejects: false, reason: 'The groups hardly tell scene and motion apart. Look at depth and quadrature.' },
  'noise': { label: 'Noise of a sum', unit: '%', limit: 1, direction: 'at-most', scope: 'line', rejects: false, reason: 'The sums scatter more than a good camera’s. Add frames or light, or lower the camera’s gain.' },
} as const satisfies Record<string, CheckDefinition>
export type CheckId = keyof typeof checkDefinitions

/** One value that was checked. `repetition` is null for a check of the whole line. */
export interface CheckResult {
  checkId: string
  repetition: number | null
  /** Null when it could not be measured; `message` says why. */
  value: number | null
  unit: string
  limit: number | null
  passed: boolean
  message: string
}
