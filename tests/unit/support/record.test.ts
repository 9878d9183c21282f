import { mkdtempSync, readFileSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, describe, expect, it } from 'vitest'
import { buildSchedule, defineScenario, makeTimeline, recordSamples, writeRecordCsv, type ScenarioInput } from '../../support/forward'

const directory = mkdtempSync(join(tmpdir(), 'forward-record-'))
afterAll(() => rmSync(directory, { recursive: true }))

const quiet = { lampNoiseVolts: 0, forceNoiseNewtons: 0, accelerationNoise: 0 }
const timelineOf = (record: ScenarioInput['record']) => makeTimeline(defineScenario({
  width: 64, height: 48, millimetresPerPixel: 0.2,
  lines: [{ frequencyHz: 200, forceNewtons: [3, -4], field: [{ ux: [0.1, 0.05], uy: [0, 0], halfWavesX: 1 }] }],
  lamp: { darkVolts: 0.02, regimes: buildSchedule({ startSeconds: 0.1, lines: [{ frequencyHz: 200, repetitions: 1 }], darkSeconds: 0.2, referenceSeconds: 0.5, phaseSeconds: 0.5, levelVolts: 2, depth: 0.9 }) },
  record: { ...quiet, ...record },
}))

/** (2/N)·Σ x·e^{−jωt}: the complex amplitude X of x = Re{X e^{jωt}} over whole periods. */
function amplitude(samples: Float64Array, from: number, count: number, frequencyHz: number): [number, number] {
  let real = 0
  let imaginary = 0
  for (let i = from; i < from + count; i++) {
    real += 2 / count * samples[i]! * Math.cos(2 * Math.PI * frequencyHz * i / 10_000)
    imaginary -= 2 / count * samples[i]! * Math.sin(2 * Math.PI * frequencyHz * i / 10_000)
  }
  return [real, imaginary]
}

describe('record of the forward model', () => {
  it('holds dark level, lamp level and both lamp phases', () => {
    const { illumination } = recordSamples(timelineOf({}))
    expect(illumination[500]).toBeCloseTo(0.02, 12)
    expect(illumination[5000]).toBeCloseTo(2.02, 12)
    // a·sin(ωt) = Re{−ja·e^{jωt}}, a·cos(ωt) = Re{a·e^{jωt}}
    expect(amplitude(illumination, 8500, 2000, 200)).toEqual([expect.closeTo(0, 9), expect.closeTo(-1.8, 9)])
    expect(amplitude(illumination, 13_500, 2000, 200)).toEqual([expect.closeTo(1.8, 9), expect.closeTo(0, 9)])
  })

  it('holds the force and −ω²·U·scale at the probe', () => {
    const { force, acceleration } = recordSamples(timelineOf({ probe: { x: 16, y: 12, axis: 'x' } }))
    expect(amplitude(force, 5000, 2000, 200)).toEqual([expect.closeTo(3, 9), expect.closeTo(-4, 9)])
    const scale = -((2 * Math.PI * 200) ** 2) * 0.2e-3 * Math.cos(Math.PI / 4)
    expect(amplitude(acceleration, 5000, 2000, 200)).toEqual([expect.closeTo(0.1 * scale, 6), expect.closeTo(0.05 * scale, 6)])
  })

  it('has noise and mains pick-up of the stated size', () => {
    const { illumination } = recordSamples(timelineOf({ lampNoiseVolts: 0.01, mainsVolts: 0.05, mainsHz: 50 }))
    const constant = illumination.subarray(3200, 7200)
    expect(Math.hypot(...amplitude(constant, 0, 4000, 50))).toBeCloseTo(0.05, 2)
    const variance = constant.reduce((sum, value) => sum + (value - 2.02) ** 2, 0) / 4000
    expect(variance / (0.01 ** 2 + 0.05 ** 2 / 2)).toBeCloseTo(1, 1)
  })

  it('is written with header, units, delimiter and decimal comma as asked', async () => {
    const path = join(directory, 'comma.csv')
    await writeRecordCsv(timelineOf({ durationSeconds: 0.5, csv: { delimiter: ';', decimalComma: true, unitsRow: true, firstTimeSeconds: 12, names: { illumination: 'Lamp' } } }), path)
    const text = readFileSync(path, 'utf8').split('\n')
    expect(text[0]).toBe('time;Lamp;force;acceleration')
    expect(text[1]).toBe('s;V;N;m/s²')
    expect(text[2]!.split(';').slice(0, 3)).toEqual(['12,000000', '0,02000', '3,00000'])
    expect(text[4002]!.split(';').slice(0, 2)).toEqual(['12,400000', '2,02000'])
    expect(text).toHaveLength(5000 + 3)
  })

  it('is written without a time column and with fewer channels as asked', async () => {
    const path = join(directory, 'bare.tsv')
    await writeRecordCsv(timelineOf({ durationSeconds: 0.5, csv: { delimiter: '\t', timeColumn: false, channels: ['force', 'illumination'] } }), path)
    const text = readFileSync(path, 'utf8').split('\n')
    expect(text.slice(0, 2)).toEqual(['force\tillumination', '3.00000\t0.02000'])
  })
})
