import type { Flag } from '../../shared/measurement'
import type { Rational } from './streams'

export interface JudgedTimes {
  frameRate: Rational
  frameTimesSeconds: Float64Array
  variableRate: boolean
  flags: Flag[]
}

/** Rates that cameras offer, for containers that state none or a rounded one. */
const usualRates: Rational[] = [24, 25, 30, 48, 50, 60, 100, 120, 200, 240].flatMap(rate => [
  { numerator: rate, denominator: 1 },
  { numerator: rate * 1000, denominator: 1001 },
])

/**
 * Frame times from presentation ticks, and what is irregular about them.
 *
 * Where every tick agrees with a constant rate to within its rounding (a millisecond in Matroska), the times are those
 * of the exact rate; otherwise they are the ticks themselves. Ticks ascend; the first frame's time is 0.
 *
 * @param stated rates from the header, the likelier first
 */
export function judgeTimes(ticks: Float64Array, timeBase: Rational, stated: readonly Rational[]): JudgedTimes {
  const tickSeconds = timeBase.numerator / timeBase.denominator
  const times = ticks.map(tick => (tick - ticks[0]) * tickSeconds)
  const constant = [...stated, ...usualRates].find(rate => isConstant(times, rate, tickSeconds))
  if (constant) return { frameRate: constant, frameTimesSeconds: times.map((_, i) => i * constant.denominator / constant.numerator), variableRate: false, flags: [] }
  const frameRate = nearestRate(median(steps(times)), stated, timeBase, median(steps(ticks)))
  return { frameRate, frameTimesSeconds: times, ...irregularities(times, frameRate.denominator / frameRate.numerator, tickSeconds) }
}

const steps = (values: Float64Array) => values.subarray(1).map((value, i) => value - values[i])

function median(values: Float64Array): number {
  return values.slice().sort()[values.length >> 1] ?? 0
}

/** How far a timestamp may lie from a constant rate: its rounding, but never near a whole frame. */
const tolerance = (periodSeconds: number, tickSeconds: number) => Math.min(1.01 * tickSeconds, 0.2 * periodSeconds)

function isConstant(times: Float64Array, { numerator, denominator }: Rational, tickSeconds: number): boolean {
  const period = denominator / numerator
  const allowed = tolerance(period, tickSeconds)
  return times.every((time, i) => Math.abs(time - i * period) <= allowed)
}

function nearestRate(periodSeconds: number, stated: readonly Rational[], timeBase: Rational, stepTicks: number): Rational {
  const error = ({ numerator, denominator }: Rational) => Math.abs(denominator / numerator / periodSeconds - 1)
  const [best] = [...stated].sort((a, b) => error(a) - error(b))
  if (best && (error(best) < 0.02 || !(stepTicks > 0))) return best
  return stepTicks > 0 ? { numerator: timeBase.denominator, denominator: timeBase.numerator * stepTicks } : { numerator: 1, denominator: 1 }
}

function irregularities(times: Float64Array, period: number, tickSeconds: number): { variableRate: boolean, flags: Flag[] } {
  const allowed = 2 * tolerance(period, tickSeconds)
  const gaps: number[] = []
  let missing = 0
  let repeated = 0
  let irregular = 0
  for (let i = 1; i < times.length; i++) {
    const step = times[i] - times[i - 1]
    const whole = Math.round(step / period)
    if (step <= 0) repeated++
    else if (whole === 0 || Math.abs(step - whole * period) > allowed) irregular++
    else if (whole > 1) {
      gaps.push(i)
      missing += whole - 1
    }
  }
  const flags: Flag[] = []
  if (irregular) flags.push({ code: 'variable-rate', severity: 'warning', message: `The frame rate varies: ${irregular} of ${times.length - 1} frame intervals are not ${(1000 * period).toFixed(3)} ms. Each frame keeps its own time, but its exposure is uncertain: set the camera to a constant rate.` })
  if (gaps.length) flags.push({ code: 'timestamp-gaps', severity: 'warning', message: `${missing} ${missing === 1 ? 'frame is' : 'frames are'} missing in ${gaps.length} ${gaps.length === 1 ? 'gap' : 'gaps'}, the first before frame ${gaps[0]} at ${times[gaps[0]].toFixed(3)} s. Use a faster card or a lower bit rate.` })
  if (repeated) flags.push({ code: 'repeated-timestamps', severity: 'problem', message: `${repeated} frames bear the time of the frame before them, so when they were exposed is unknown. Export the clip again without conversion.` })
  return { variableRate: irregular > 0, flags }
}
