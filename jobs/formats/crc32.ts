const tables = makeTables()

/** Eight tables: eight bytes a step ("slicing by 8", Kounavis & Berry 2008). */
function makeTables(): Uint32Array[] {
  const all = Array.from({ length: 8 }, () => new Uint32Array(256))
  for (let byte = 0; byte < 256; byte++) {
    let value = byte
    for (let bit = 0; bit < 8; bit++) value = value & 1 ? (value >>> 1) ^ 0xedb88320 : value >>> 1
    all[0][byte] = value
  }
  for (let byte = 0; byte < 256; byte++) {
    for (let slice = 1; slice < 8; slice++) all[slice][byte] = (all[slice - 1][byte] >>> 8) ^ all[0][all[slice - 1][byte] & 0xff]
  }
  return all
}

/**
 * CRC-32 as ZIP and PNG use it (polynomial 0xEDB88320, reflected).
 *
 * @param previous CRC of the bytes before, to go on from; 0 at the start
 * @returns unsigned 32-bit value
 */
export function crc32(bytes: Uint8Array, previous = 0): number {
  const [t0, t1, t2, t3, t4, t5, t6, t7] = tables
  let crc = ~previous
  let i = 0
  for (; i + 8 <= bytes.length; i += 8) {
    crc ^= bytes[i] | bytes[i + 1] << 8 | bytes[i + 2] << 16 | bytes[i + 3] << 24
    crc = t7[crc & 0xff] ^ t6[(crc >>> 8) & 0xff] ^ t5[(crc >>> 16) & 0xff] ^ t4[crc >>> 24]
      ^ t3[bytes[i + 4]] ^ t2[bytes[i + 5]] ^ t1[bytes[i + 6]] ^ t0[bytes[i + 7]]
  }
  for (; i < bytes.length; i++) crc = (crc >>> 8) ^ t0[(crc ^ bytes[i]) & 0xff]
  return ~crc >>> 0
}

/** Product of a 32 × 32 matrix over GF(2), one column a word, and a vector. */
function timesVector(matrix: Uint32Array, vector: number): number {
  let sum = 0
  for (let bit = 0; vector !== 0; vector >>>= 1, bit++) if (vector & 1) sum ^= matrix[bit]
  return sum >>> 0
}

const squared = (matrix: Uint32Array) => matrix.map(column => timesVector(matrix, column))

/**
 * CRC-32 of two pieces one after another, from the CRC of each.
 *
 * Appending zeros is linear over GF(2), so the first piece's CRC is moved on by `secondBytes` zeros through squarings of
 * the operator of a single zero bit (the method of zlib's crc32_combine).
 */
export function combineCrc32(first: number, second: number, secondBytes: number): number {
  let operator: Uint32Array = Uint32Array.from({ length: 32 }, (_, bit) => bit === 0 ? 0xedb88320 : 2 ** (bit - 1))
  for (let doubling = 0; doubling < 3; doubling++) operator = squared(operator)
  let moved = first
  for (let bytes = secondBytes; bytes > 0; bytes = Math.floor(bytes / 2)) {
    if (bytes % 2) moved = timesVector(operator, moved)
    operator = squared(operator)
  }
  return (moved ^ second) >>> 0
}
