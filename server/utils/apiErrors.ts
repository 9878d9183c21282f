import { createError, isError, type H3Error, type H3Event } from 'h3'
import { errorCatalogue, LampsumError, type ErrorBody } from '#shared/errors'
import { isDatabaseAway } from '../db/retry'

/** The one mapper at the API's edge: whatever was thrown becomes `{ statusCode, statusMessage, data }` of the contract. */
export function toApiError(error: unknown, event?: H3Event): H3Error<ErrorBody> {
  if (isError<ErrorBody>(error) && error.data?.code) return error
  const known = asLampsumError(error)
  if (known.code === 'server-error') console.error(`[api] ${event?.method ?? ''} ${event?.path.split('?')[0] ?? ''}`, error)
  return createError<ErrorBody>({
    statusCode: known.status,
    statusMessage: known.code,
    data: { code: known.code, message: known.message, ...(known.options.fields ? { fields: known.options.fields } : {}) },
  })
}

function asLampsumError(error: unknown): LampsumError {
  if (error instanceof LampsumError) return error
  if (isDatabaseAway(error)) return new LampsumError('database-away', undefined, { cause: error })
  return new LampsumError('server-error', errorCatalogue['server-error'][1], { cause: error })
}
