import { pipeline } from 'node:stream/promises'
import type { Readable } from 'node:stream'
import { getRequestHeader, removeResponseHeader, setResponseHeader, setResponseHeaders, setResponseStatus, type H3Event } from 'h3'
import { LampsumError } from '#shared/errors'
import { isUnchanged, mayAnswerPart, parseRange } from './httpRange'

export interface Download {
  bytes: number
  contentType: string
  /** Without quotes: names these bytes and no others. */
  tag: string
  headers?: Record<string, string>
  open: (range: { start: number, end: number }) => Readable
}

/** Answers with an immutable file: whole, in part, or not at all when the client has it. Resolves when the client has it or has left. */
export async function sendDownload(event: H3Event, { bytes, contentType, tag, headers, open }: Download): Promise<void> {
  const etag = `"${tag}"`
  setResponseHeaders(event, {
    'etag': etag, 'accept-ranges': 'bytes', 'cache-control': 'private, max-age=31536000, immutable',
    // Another person at the same browser has to ask again.
    'vary': 'Cookie, Authorization', ...headers,
  })
  if (isUnchanged(getRequestHeader(event, 'if-none-match'), etag)) return answer(event, 304)
  setResponseHeader(event, 'content-type', contentType)
  const asked = event.method === 'GET' && mayAnswerPart(getRequestHeader(event, 'if-range'), etag) ? parseRange(getRequestHeader(event, 'range'), bytes) : { kind: 'whole' as const }
  if (asked.kind === 'unsatisfiable') {
    for (const name of ['etag', 'repr-digest', 'content-disposition'] as const) removeResponseHeader(event, name)
    setResponseHeaders(event, { 'content-range': `bytes */${bytes}`, 'cache-control': 'private, no-store' })
    throw new LampsumError('range-not-satisfiable')
  }
  const part = asked.kind === 'part' ? asked : { start: 0, end: bytes - 1 }
  if (asked.kind === 'part') setResponseHeader(event, 'content-range', `bytes ${part.start}-${part.end}/${bytes}`)
  setResponseHeader(event, 'content-length', part.end - part.start + 1)
  if (event.method === 'HEAD' || bytes === 0) return answer(event, 200)
  setResponseStatus(event, asked.kind === 'part' ? 206 : 200)
  await sendStream(event, open({ start: part.start, end: part.end }))
}

function answer(event: H3Event, status: number): void {
  setResponseStatus(event, status)
  event.node.res.end()
}

/** Node's pipeline reads no faster than the client takes it. */
async function sendStream(event: H3Event, stream: Readable): Promise<void> {
  try {
    await pipeline(stream, event.node.res)
  } catch (error) {
    // Once the head is out the only way to say that the rest is missing is to break the connection.
    if (!event.node.res.headersSent) throw error
    event.node.res.destroy()
    if ((error as NodeJS.ErrnoException).code !== 'ERR_STREAM_PREMATURE_CLOSE') console.error(`[download] ${event.path}`, error)
  }
}
