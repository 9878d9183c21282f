import type { H3Error } from 'h3'
import type { NitroErrorHandler } from 'nitropack'
import { LampsumError, type ErrorCode } from '#shared/errors'

/** The API's errors in the API's form, without a stack. Pages are left to Nuxt. */
export default <NitroErrorHandler> function answerApiError(error, event) {
  if (!event.path.startsWith('/api/') || event.node.res.headersSent) return
  const { statusCode, statusMessage, data } = toApiError(ofFramework(error), event)
  setResponseStatus(event, statusCode, statusMessage)
  setResponseHeader(event, 'content-type', 'application/json')
  return send(event, JSON.stringify({ statusCode, statusMessage, data }))
}

const codes: Record<number, ErrorCode> = { 404: 'not-found', 405: 'not-found', 413: 'too-large' }

/** What h3 itself refuses carries a status but none of our codes. */
function ofFramework(error: H3Error): Error {
  if ((error.data as { code?: string } | undefined)?.code || error.statusCode >= 500) return error
  return new LampsumError(codes[error.statusCode] ?? 'bad-input', undefined, { cause: error })
}
