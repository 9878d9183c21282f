import type { Flag } from '../../shared/measurement'
import { RecordError } from './recordError'

export interface TimeBase {
  sampleRateHz: number
  /** Time of the first row as the file counts it. */
  startSeconds: number
  flags: Flag[]
}

const blockLength = 1024
/** How far a sample's time may lie from the even grid, in sample periods: time columns are printed with few digits. */
const toleranceSamples = 0.25

interface Deviation {
  value: number
  row: number
  line: number
}

/**
 * Judges whether a time column is evenly spaced without keeping it: the deviations from a first guess of the period are
 * kept as extremes of blocks of 1024 rows, and judged against the final period at the end.
 */
export class UniformTime {
  private rows = 0
  private first = 0
  private last = 0
  private period = 0
  private readonly early: { time: number, line: number }[] = []
  private readonly extremes: Deviation[] = []
  private lowest: Deviation | null = null
  private highest: Deviation | null = null
  /** The largest change of the deviation from one row to the next. */
  private jump: Deviation = { value: 0, row: 0, line: 0 }
  private before = 0
  private readonly where: string

  /** @param place how messages name a row: "Line" or "Sample" */
  constructor(private readonly place = 'Line') {
    this.where = place.toLowerCase()
  }

  /** @throws RecordError `time-not-uniform` when the time does not move on */
  add(time: number, line: number): void {
    if (this.rows === 0) this.first = time
    else if (!(time > this.last)) throw new RecordError('time-not-uniform', `${this.place} ${line}: the time ${time} does not lie after the ${this.last} of the row before. Export the time with more digits, or leave the time column out and give the sample rate.`)
    this.last = time
    this.rows++
    if (this.period === 0) this.gather(time, line)
    else this.judge(this.rows - 1, time, line)
  }

  /**
   * @returns the sample rate from first and last row, and the first row's time
   * @throws RecordError `time-not-uniform` naming the line that is farthest off
   */
  finish(): TimeBase {
    const period = (this.last - this.first) / (this.rows - 1)
    if (this.period === 0) this.settle(period)
    this.closeBlock()
    let worst: Deviation = { value: 0, row: 0, line: 0 }
    for (const { value, row, line } of this.extremes) {
      const off = value - row * (period - this.period)
      if (Math.abs(off) > Math.abs(worst.value)) worst = { value: off, row, line }
    }
    if (Math.abs(worst.value) <= toleranceSamples * period) return { sampleRateHz: Number((1 / period).toPrecision(12)), startSeconds: this.first, flags: [] }
    if (Math.abs(this.jump.value) > period / 2) throw new RecordError('time-not-uniform', `The samples are not evenly spaced in time: at ${this.where} ${this.jump.line} the time steps by ${(1000 * (this.period + this.jump.value)).toPrecision(3)} ms instead of ${(1000 * this.period).toPrecision(3)} ms. If the logger’s clock was even, leave the time column out and give the sample rate; otherwise record again.`)
    throw new RecordError('time-not-uniform', `The samples are not evenly spaced in time: ${this.where} ${worst.line} is ${(1000 * Math.abs(worst.value)).toPrecision(3)} ms ${worst.value > 0 ? 'late' : 'early'}. If the logger’s clock was even, leave the time column out and give the sample rate; otherwise record again.`)
  }

  /** The first rows wait until the period can be guessed well. */
  private gather(time: number, line: number): void {
    this.early.push({ time, line })
    if (this.early.length === blockLength) this.settle((this.last - this.first) / (this.rows - 1))
  }

  private settle(period: number): void {
    this.period = period
    this.early.forEach(({ time, line }, row) => this.judge(row, time, line))
    this.early.length = 0
  }

  private judge(row: number, time: number, line: number): void {
    const value = time - this.first - row * this.period
    if (row && Math.abs(value - this.before) > Math.abs(this.jump.value)) this.jump = { value: value - this.before, row, line }
    this.before = value
    if (!this.lowest || value < this.lowest.value) this.lowest = { value, row, line }
    if (!this.highest || value > this.highest.value) this.highest = { value, row, line }
    if (row % blockLength === blockLength - 1) this.closeBlock()
  }

  private closeBlock(): void {
    if (this.lowest) this.extremes.push(this.lowest, this.highest!)
    this.lowest = this.highest = null
  }
}

/** The time column beside a sample rate that was given: it tells where the record begins and whether the rate fits. */
export class GivenRate {
  private rows = 0
  private first = 0
  private last = 0

  constructor(private readonly sampleRateHz: number) {}

  add(time: number): void {
    if (this.rows++ === 0) this.first = time
    this.last = time
  }

  finish(): TimeBase {
    const found = (this.rows - 1) / (this.last - this.first)
    const fits = Math.abs(found / this.sampleRateHz - 1) <= 1e-3
    return {
      sampleRateHz: this.sampleRateHz, startSeconds: this.first,
      flags: fits ? [] : [{ code: 'sample-rate-differs', severity: 'warning', message: `The time column says ${Number(found.toPrecision(6))} Hz, but the ${this.sampleRateHz} Hz that were given are used. Check the sample rate.` }],
    }
  }
}
