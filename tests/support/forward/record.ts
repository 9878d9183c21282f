import { createWriteStream } from 'node:fs'
import { once } from 'node:events'
import { lampSignal } from './lamp'
import { fieldAt } from './modeField'
import { gaussianRandom } from './random'
import type { Scenario } from './scenario'
import { excitedLine, regimeIndexAt, toRecordSeconds, type Timeline } from './timeline'

export interface RecordSamples { illumination: Float64Array, force: Float64Array, acceleration: Float64Array }

/** What the acquisition system writes down: photodiode in V, force in N, acceleration at the probe in m/s². */
export function recordSamples(timeline: Timeline): RecordSamples {
  const { scenario } = timeline
  const { record } = scenario
  const count = Math.round(record.durationSeconds * record.sampleRateHz)
  const make = () => new Float64Array(count)
  const samples = { illumination: make(), force: make(), acceleration: make() }
  const normal = gaussianRandom(scenario.seed + 101)
  const lines = scenario.lines.map(line => lineSignals(scenario, line))
  for (let i = 0; i < count; i++) {
    const t = i / record.sampleRateHz
    samples.illumination[i] = photodiode(timeline, t) + record.lampNoiseVolts * normal()
    const line = lines[excitedLine(timeline, regimeIndexAt(timeline, t))]
    if (line) {
      const cosine = Math.cos(line.omega * t)
      const sine = Math.sin(line.omega * t)
      samples.force[i] = line.force[0] * cosine - line.force[1] * sine
      samples.acceleration[i] = line.acceleration[0] * cosine - line.acceleration[1] * sine
    }
    samples.force[i]! += record.forceNoiseNewtons * normal()
    samples.acceleration[i]! += record.accelerationNoise * normal()
  }
  return samples
}

function lineSignals(scenario: Scenario, { frequencyHz, field, forceNewtons }: Scenario['lines'][number]) {
  const omega = 2 * Math.PI * frequencyHz
  const { probe } = scenario.record
  const motion = fieldAt(field, probe.x, probe.y, scenario.width, scenario.height)[probe.axis === 'x' ? 'ux' : 'uy']
  const metresPerPixel = scenario.millimetresPerPixel / 1000
  return { omega, force: forceNewtons, acceleration: motion.map(part => -omega * omega * part * metresPerPixel) as [number, number] }
}

/** The photodiode without noise: dark level, lamp, mains pick-up. */
export function photodiode(timeline: Timeline, recordSeconds: number): number {
  const { lamp, record } = timeline.scenario
  const light = lampSignal(timeline.regimes[regimeIndexAt(timeline, recordSeconds)]!, recordSeconds)
  return lamp.darkVolts + light + record.mainsVolts * Math.sin(2 * Math.PI * record.mainsHz * recordSeconds)
}

const units = { time: 's', illumination: 'V', force: 'N', acceleration: 'm/s²' }

/** Writes the record as text with a header line. */
export async function writeRecordCsv(timeline: Timeline, path: string, samples = recordSamples(timeline)): Promise<void> {
  const { csv, sampleRateHz } = timeline.scenario.record
  const columns = csv.timeColumn ? ['time' as const, ...csv.channels] : csv.channels
  const separator = csv.delimiter
  const timeDigits = Math.ceil(Math.log10(sampleRateHz)) + 2
  const text = (value: number, digits: number) => csv.decimalComma ? value.toFixed(digits).replace('.', ',') : value.toFixed(digits)
  const file = createWriteStream(path)
  file.write(columns.map(column => csv.names[column]).join(separator) + '\n')
  if (csv.unitsRow) file.write(columns.map(column => units[column]).join(separator) + '\n')
  const count = samples.illumination.length
  for (let start = 0; start < count; start += 20_000) {
    let chunk = ''
    for (let i = start; i < Math.min(count, start + 20_000); i++) {
      let row = csv.timeColumn ? text(csv.firstTimeSeconds + i / sampleRateHz, timeDigits) : ''
      csv.channels.forEach((channel, index) => row += (index > 0 || csv.timeColumn ? separator : '') + text(samples[channel][i]!, 5))
      chunk += row + '\n'
    }
    if (!file.write(chunk)) await once(file, 'drain')
  }
  file.end()
  await once(file, 'finish')
}

/** The photodiode on the camera's microphone input, as a 16-bit mono WAV file that starts with the clip. */
export function audioWav(timeline: Timeline): Buffer {
  const { camera, encoding } = timeline.scenario
  const { sampleRateHz, fullScaleVolts } = encoding.audio!
  const count = Math.round(camera.frameCount * camera.frameRate.denominator / camera.frameRate.numerator * sampleRateHz)
  const file = Buffer.alloc(44 + 2 * count)
  file.write('RIFF', 0, 'ascii')
  file.writeUInt32LE(36 + 2 * count, 4)
  file.write('WAVEfmt ', 8, 'ascii')
  const header = [[16, 4], [1, 2], [1, 2], [sampleRateHz, 4], [2 * sampleRateHz, 4], [2, 2], [16, 2]] as const
  let at = 16
  for (const [value, bytes] of header) at = file.writeUIntLE(value, at, bytes)
  file.write('data', 36, 'ascii')
  file.writeUInt32LE(2 * count, 40)
  for (let i = 0; i < count; i++) {
    const volts = photodiode(timeline, toRecordSeconds(timeline.scenario, i / sampleRateHz))
    file.writeInt16LE(Math.max(-32768, Math.min(32767, Math.round(32767 * volts / fullScaleVolts))), 44 + 2 * i)
  }
  return file
}
