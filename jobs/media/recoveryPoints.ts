import { editListOptions, inputFile, inputLimits, runProcess } from './ffmpegProcess'
import { passLimits } from './processLimits'

const slice = 1
const resetSlice = 5
const supplement = 6
/** Payload type of a recovery point (Rec. ITU-T H.264 clause D.1.1). */
const recoveryPoint = 6
/** Bytes of a unit that are looked at; messages in front of a recovery point can be long. */
const headBytes = 4096

/**
 * For each key packet of an H.264 stream, in decoding order: whether it is an IDR picture or an exact recovery point
 * (Rec. ITU-T H.264 D.2.8: recovery_frame_cnt 0, exact_match_flag 1, broken_link_flag 0), so that every picture output
 * at or after it is decoded exactly without what lies before.
 *
 * @returns null when the pictures found are not as many as the key packets (fields, damage): then nothing is known
 */
export async function scanRecoveryPoints(path: string, container: string, keyPackets: number, signal?: AbortSignal): Promise<boolean[] | null> {
  const pictures: boolean[] = []
  let exactNext = false
  const unit = (bytes: Uint8Array) => {
    const type = bytes[0] & 31
    if (type === supplement) exactNext ||= hasExactRecoveryPoint(bytes)
    // The first bit behind the head is set for a slice that begins a picture (first_mb_in_slice 0).
    if ((type !== slice && type !== resetSlice) || !(bytes[1] & 0x80)) return
    pictures.push(exactNext || type === resetSlice)
    exactNext = false
  }
  const { exitCode } = await runProcess('ffmpeg', [
    '-nostdin', '-hide_banner', '-v', 'error', ...inputLimits, ...editListOptions(container), '-i', inputFile(path),
    '-map', '0:V:0', '-c', 'copy', '-copyinkf', '-bsf:v', 'noise=drop=not(key),filter_units=pass_types=1|5|6,h264_mp4toannexb', '-f', 'h264', 'pipe:1',
  ], {
    signal, ...await passLimits(path),
    onOutput: async (stdout) => {
      let rest: Uint8Array = new Uint8Array(0)
      for await (const chunk of stdout as AsyncIterable<Uint8Array>) rest = splitUnits(Buffer.concat([rest, chunk]), unit)
      if (rest.length > 3) unit(rest.subarray(3))
    },
  })
  return exitCode === 0 && pictures.length === keyPackets ? pictures : null
}

const startCode = Buffer.from([0, 0, 1])

/** Hand over the head of each unit that is whole; answers what is left, from its start code on. */
function splitUnits(bytes: Buffer, unit: (bytes: Uint8Array) => void): Uint8Array {
  let start = bytes.indexOf(startCode)
  if (start < 0) return bytes.subarray(-2)
  for (let next = bytes.indexOf(startCode, start + 3); next >= 0; next = bytes.indexOf(startCode, start + 3)) {
    unit(bytes.subarray(start + 3, Math.min(next, start + 3 + headBytes)))
    start = next
  }
  const left = bytes.subarray(start)
  // A long unit's head is enough, and the two last bytes may begin a start code.
  return left.length > 2 * headBytes ? Buffer.concat([left.subarray(0, headBytes), left.subarray(-2)]) : left
}

/** Go through the messages of a supplemental unit (Rec. ITU-T H.264 clause 7.3.2.3). */
export function hasExactRecoveryPoint(unit: Uint8Array): boolean {
  const bytes = withoutEmulation(unit.subarray(1))
  for (let at = 0; at + 2 < bytes.length;) {
    let type = 0
    let size = 0
    for (; bytes[at] === 255; at++) type += 255
    type += bytes[at++]
    for (; bytes[at] === 255; at++) size += 255
    size += bytes[at++]
    // ue(0) is the bit 1, then exact_match_flag 1, broken_link_flag 0.
    if (type === recoveryPoint && size > 0) return (bytes[at] & 0b1110_0000) === 0b1100_0000
    at += size
  }
  return false
}

function withoutEmulation(bytes: Uint8Array): Uint8Array {
  return bytes.filter((byte, i) => !(byte === 3 && i > 1 && bytes[i - 1] === 0 && bytes[i - 2] === 0))
}
