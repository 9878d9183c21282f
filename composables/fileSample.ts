const pieces = 16
const pieceBytes = 64 * 1024

/**
 * A short fingerprint of a file's *content* (pieces spread over it, and its size), so that a resumed upload is never
 * continued with another file of the same name and size. It only guards against mix-ups; what proves the file is
 * the server's SHA-256. Works without a secure context. Hash: FNV-1a, two 32-bit lanes (Fowler, Noll, Vo 1991).
 */
export async function sampleFile(file: Blob): Promise<string> {
  let low = 0x811C9DC5
  let high = 0x01000193
  for (const start of pieceStarts(file.size)) {
    const bytes = new Uint8Array(await file.slice(start, start + pieceBytes).arrayBuffer())
    for (const byte of bytes) {
      low = Math.imul(low ^ byte, 0x01000193)
      high = Math.imul(high ^ byte, 0x85EBCA6B) + 1
    }
  }
  const hex = (value: number) => (value >>> 0).toString(16).padStart(8, '0')
  return `${file.size}-${hex(low)}${hex(high)}`
}

/** From the first byte to the last: the whole file when it is small. */
function pieceStarts(size: number): number[] {
  const last = Math.max(0, size - pieceBytes)
  const count = Math.min(pieces, Math.ceil(last / pieceBytes) + 1)
  return Array.from({ length: count }, (_, index) => count === 1 ? 0 : Math.round(last * index / (count - 1)))
}
