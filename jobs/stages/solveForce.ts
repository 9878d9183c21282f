import { open } from 'node:fs/promises'
import type { FrameTiming } from '../signal/lightPrediction'
import { fitSine3 } from '../signal/sineFit'

const leastSamples = 16

/**
 * Complex amplitude F of the force, f(t) = Re{F e^{jωt}}, over the span of a group's exposures, t in record time. Only
 * that span of the channel is read.
 *
 * @param path raw little-endian float32 of the channel
 * @returns real and imaginary part; null when the record does not cover enough of the span
 */
export async function forceOver(path: string, sampleRateHz: number, timing: FrameTiming, frequencyHz: number, { firstFrame, frameCount }: { firstFrame: number, frameCount: number }): Promise<[number, number] | null> {
  const timeOf = (frame: number) => timing.offsetSeconds + (1 + timing.driftPpm * 1e-6) * timing.frameTimesSeconds[frame]!
  const file = await open(path, 'r')
  try {
    const samples = (await file.stat()).size / 4
    const first = Math.max(0, Math.ceil(timeOf(firstFrame) * sampleRateHz))
    const last = Math.min(samples - 1, Math.floor((timeOf(firstFrame + frameCount - 1) + timing.exposureSeconds) * sampleRateHz))
    const count = last - first + 1
    if (count < leastSamples) return null
    const values = new Float32Array(count)
    await file.read(values, 0, count * 4, first * 4)
    const { sine, cosine } = fitSine3(values, sampleRateHz, frequencyHz, { origin: first })
    return [cosine, -sine]
  } finally {
    await file.close()
  }
}
