/**
 * What is checked on every repetition, with its limit and the reason for it. The check stage, the frame set page
 * and the tests read this one table.
 */

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
