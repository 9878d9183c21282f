import type { H3Event } from 'h3'
import { StreamClient } from './eventStreamClient'
import { EventFeed } from './eventStreamFeed'
import type { Caller } from './session'

const feed = new EventFeed({ database: useDatabase, demo: isDemo })

/** Answers with the live events until the client leaves. Everything that can be refused is refused before the headers. */
export async function openEventStream(event: H3Event, caller: Caller): Promise<void> {
  await feed.ready()
  const response = event.node.res
  setResponseHeaders(event, { 'content-type': 'text/event-stream; charset=utf-8', 'cache-control': 'no-store', 'x-accel-buffering': 'no' })
  response.writeHead(200)
  // Straight on Node's response: h3's sendStream goes on writing to a reader that has stopped.
  response.flushHeaders()
  const client = new StreamClient(response, caller)
  await feed.join(client, readCursor(event)).catch(() => client.close())
  await client.gone
}

/** The browser's own header is newer than the address it was opened with. */
function readCursor(event: H3Event): number | null {
  const value = getRequestHeader(event, 'last-event-id') ?? getQuery(event).lastEventId
  if (value === undefined || value === '') return null
  return /^\d{1,15}$/.test(String(value)) ? Number(value) : Number.NaN
}

export const closeEventStreams = () => feed.closeAll()
