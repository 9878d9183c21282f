export type Utf16 = 'utf-16le' | 'utf-16be'

/** Whether text is UTF-16: by its byte order mark, or because every other byte of its beginning is zero. */
export function findUtf16(head: Uint8Array): Utf16 | null {
  if (head[0] === 0xff && head[1] === 0xfe) return 'utf-16le'
  if (head[0] === 0xfe && head[1] === 0xff) return 'utf-16be'
  const pairs = Math.min(64, Math.floor(head.length / 2))
  if (pairs < 8) return null
  let even = 0
  let odd = 0
  for (let i = 0; i < pairs; i++) {
    if (head[2 * i] === 0) even++
    if (head[2 * i + 1] === 0) odd++
  }
  if (odd > 0.9 * pairs && even === 0) return 'utf-16le'
  return even > 0.9 * pairs && odd === 0 ? 'utf-16be' : null
}

/** Text as UTF-8, whether it comes as UTF-16 or not; other bytes pass as they are. */
export async function* asUtf8(chunks: AsyncIterable<Uint8Array>): AsyncGenerator<Uint8Array> {
  let decoder: InstanceType<typeof TextDecoder> | null | undefined
  const encoder = new TextEncoder()
  for await (const chunk of chunks) {
    if (decoder === undefined) {
      const encoding = findUtf16(chunk)
      decoder = encoding ? new TextDecoder(encoding) : null
    }
    yield decoder ? encoder.encode(decoder.decode(chunk, { stream: true })) : chunk
  }
}
