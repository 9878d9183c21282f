import { createHash } from 'node:crypto'
import { crc32 } from 'node:zlib'
import { combineCrc32 } from '../formats/crc32'
import { writeNpyHeader } from '../formats/npy'

/** Proof of one group's sums: SHA-256 for identity, CRC-32 for the archive that they go into. */
export interface SumDigest {
  sha256: string
  crc: number
}

export function digestOf(image: Uint8Array): SumDigest {
  return { sha256: createHash('sha256').update(image).digest('hex'), crc: crc32(image) }
}

/** CRC-32 of the sums' member of a frame set, header included, without reading the sums again. */
export function crcOfMember(digests: readonly SumDigest[], height: number, width: number): number {
  const header = crc32(writeNpyHeader('uint32', [digests.length, height, width]))
  return digests.reduce((crc, digest) => combineCrc32(crc, digest.crc, 4 * height * width), header)
}
