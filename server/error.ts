import type { NitroErrorHandler } from 'nitropack'

/** The API's errors in the API's form, without a stack. Pages are left to Nuxt. */
export default <NitroErrorHandler> function answerApiError(error, event) {
  if (!event.path.startsWith('/api/') || event.node.res.headersSent) return
  const { statusCode, statusMessage, data } = toApiError(error, event)
  setResponseStatus(event, statusCode, statusMessage)
  setResponseHeader(event, 'content-type', 'application/json')
  return send(event, JSON.stringify({ statusCode, statusMessage, data }))
}
