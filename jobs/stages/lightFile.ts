import { readFile, writeFile } from 'node:fs/promises'
import { readNpz, writeNpz } from '../formats/npz'
import type { FrameMeter } from '../imaging/accumulate'
import { countsPerWhite } from '../media/transfer'

/** The measured light of a clip's frames, one value a frame; NaN where a frame has not been measured. */
export interface FrameLight {
  /** Mean linear light, 1 at nominal white. */
  light: Float64Array
  /** Shares of clipped and of black pixels, 0…1. */
  clipped: Float64Array
  black: Float64Array
  /** Change of `light` from the frame before. */
  difference: Float64Array
  /** Mean linear light of the lamp patch; only where there is one. */
  patch?: Float64Array
}

export function emptyLight(frameCount: number, withPatch = false): FrameLight {
  const column = () => new Float64Array(frameCount).fill(Number.NaN)
  return { light: column(), clipped: column(), black: column(), difference: column(), ...withPatch ? { patch: column() } : {} }
}

export function setLight(target: FrameLight, frame: number, { counts, pixels, clipped, black }: FrameMeter): void {
  target.light[frame] = counts / pixels / countsPerWhite
  target.clipped[frame] = clipped / pixels
  target.black[frame] = black / pixels
}

/** What ties the clip to the record: the lamp patch where there is one, else the whole picture. */
export const timingLight = ({ patch, light }: FrameLight): Float64Array => patch ?? light

export async function writeLight(path: string, measured: FrameLight): Promise<void> {
  const { light, difference } = measured
  difference[0] = 0
  for (let frame = 1; frame < light.length; frame++) difference[frame] = light[frame]! - light[frame - 1]!
  const column = (data: Float64Array) => ({ dtype: 'float64' as const, shape: [data.length], data })
  await writeFile(path, writeNpz({ light: column(light), clipped: column(measured.clipped), black: column(measured.black), difference: column(difference), ...measured.patch ? { patch: column(measured.patch) } : {} }))
}

export async function readLightFile(path: string): Promise<FrameLight> {
  const { light, clipped, black, difference, patch } = readNpz(await readFile(path))
  return { light: light!.data, clipped: clipped!.data, black: black!.data, difference: difference!.data, ...patch ? { patch: patch.data } : {} } as FrameLight
}
