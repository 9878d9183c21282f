export default defineRoute('GET /api/records/:id/channels/:name', async ({ event, params, query }) => {
  const envelope = await readChannelEnvelope(useDatabase(), useFileStore(), params.id!, params.name!, query)
  setResponseHeader(event, 'vary', 'Accept')
  if (!getRequestHeader(event, 'accept')?.includes('application/octet-stream')) return envelope
  setResponseHeaders(event, { 'content-type': 'application/octet-stream', 'x-lampsum-from-seconds': String(envelope.fromSeconds), 'x-lampsum-to-seconds': String(envelope.toSeconds), 'x-lampsum-columns': envelope.minimum.length })
  // h3 sends the bytes as they are; the contract of the JSON answer stays the route's type.
  return packEnvelope(envelope) as never
})
