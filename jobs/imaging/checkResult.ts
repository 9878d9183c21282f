import { checkDefinitions, type CheckDefinition, type CheckId, type CheckResult } from '../../shared/checks'

/** A measured value against its limit, as a sentence. */
export function judge(checkId: CheckId, repetition: number | null, value: number): CheckResult {
  const { label, unit, limit, direction, reason }: CheckDefinition = checkDefinitions[checkId]
  const passed = direction === 'at-most' ? value <= limit : value >= limit
  const amount = `${label} ${shown(value)}${unit ? ` ${unit}` : ''}, ${direction === 'at-most' ? 'limit' : 'at least'} ${limit}${unit ? ` ${unit}` : ''}.`
  return { checkId, repetition, value, unit, limit, passed, message: passed ? amount : `${amount} ${reason}` }
}

/** What could not be measured does not fail unless `passed` is false. */
export function unmeasured(checkId: CheckId, repetition: number | null, why: string, passed = true): CheckResult {
  const { unit, limit }: CheckDefinition = checkDefinitions[checkId]
  return { checkId, repetition, value: null, unit, limit, passed, message: why }
}

const shown = (value: number) => Math.abs(value) >= 100 ? value.toFixed(0) : Number(value.toPrecision(3)).toString()
