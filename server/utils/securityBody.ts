import type { H3Event } from 'h3'
import { LampsumError } from '#shared/errors'

const tooLarge = (limit: number) => new LampsumError('too-large', `The body is larger than the ${limit / 1e6} MB allowed here. Send less at once.`)

/** Refuses a body over the limit: at once when its length is announced, else as soon as it gets there. */
export async function limitBody(event: H3Event, limit: number): Promise<void> {
  const { headers } = event.node.req
  if (Number(headers['content-length'] ?? 0) > limit) throw refuse(event, limit)
  if (!headers['transfer-encoding']) return
  const chunks: Buffer[] = []
  let bytes = 0
  // Leaving the loop early must not destroy the request: the refusal goes out on the same socket.
  for await (const chunk of event.node.req.iterator({ destroyOnReturn: false }) as AsyncIterable<Buffer>) {
    bytes += chunk.length
    if (bytes > limit) throw refuse(event, limit)
    chunks.push(chunk)
  }
  // Where h3's readBody looks first.
  Object.assign(event.node.req, { rawBody: Buffer.concat(chunks) })
}

function refuse(event: H3Event, limit: number): LampsumError {
  // The rest of the body stays unread, so the connection cannot be used again.
  setResponseHeader(event, 'connection', 'close')
  return tooLarge(limit)
}
