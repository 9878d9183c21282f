import { editListOptions, inputFile, inputLimits, runProcess } from './ffmpegProcess'
import { passLimits } from './processLimits'

export interface PacketList {
  /** Presentation time of each packet in ticks of the stream's time base, ascending; the edit list is ignored. */
  ticks: Float64Array
  /** The container gives no presentation times, so the order of decoding was taken. */
  decodeTimesOnly: boolean
  /** The container gives no times at all: `ticks` just counts. */
  untimed: boolean
  /** Compressed size of the video. */
  bytes: number
  /** Compressed size of each frame, in display order. */
  frameBytes: Float64Array
  /** Display numbers of the frames whose packets are marked as key, ascending. */
  keyFrames: Int32Array
  /** The same frames as their packets are stored. */
  keysInDecodingOrder: Int32Array
  /** What ffprobe complained about while reading. */
  errorLines: string[]
}

/** Go through every packet of the video stream; reads the whole file, decodes nothing. */
export async function listPackets(path: string, container: string, signal?: AbortSignal): Promise<PacketList> {
  const presentation: number[] = []
  const decoding: number[] = []
  const keys: number[] = []
  const sizes: number[] = []
  let bytes = 0
  let partial = ''
  const add = (line: string) => {
    if (!line) return
    const [pts, dts, size, flags] = line.split(',')
    if (flags?.startsWith('K')) keys.push(presentation.length)
    presentation.push(ticksOf(pts))
    decoding.push(ticksOf(dts))
    sizes.push(Number(size))
    bytes += Number(size)
  }
  const { errorLines } = await runProcess('ffprobe', [
    '-hide_banner', '-v', 'error', ...inputLimits, ...editListOptions(container),
    '-select_streams', 'V:0', '-show_entries', 'packet=pts,dts,size,flags', '-of', 'csv=p=0', inputFile(path),
  ], {
    signal, ...await passLimits(path),
    onOutput: async (stdout) => {
      for await (const chunk of stdout.setEncoding('utf8')) {
        const lines = (partial + chunk).split('\n')
        partial = lines.pop()!
        lines.forEach(add)
      }
      add(partial)
    },
  })
  const decodeTimesOnly = presentation.some(Number.isNaN)
  const untimed = decodeTimesOnly && decoding.some(Number.isNaN)
  const times = untimed ? decoding.map((_, i) => i) : decodeTimesOnly ? decoding : presentation
  const order = Int32Array.from(times.keys()).sort((a, b) => times[a] - times[b] || a - b)
  const rank = new Int32Array(order.length)
  order.forEach((packet, frame) => rank[packet] = frame)
  const keysInDecodingOrder = Int32Array.from(keys, packet => rank[packet])
  return { ticks: Float64Array.from(order, packet => times[packet]), decodeTimesOnly, untimed, bytes, frameBytes: Float64Array.from(order, packet => sizes[packet]), keyFrames: keysInDecodingOrder.slice().sort(), keysInDecodingOrder, errorLines }
}

const ticksOf = (text: string | undefined) => text === undefined || text === '' || text === 'N/A' ? Number.NaN : Number(text)
