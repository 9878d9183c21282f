import { ERRORS } from '@tus/server'
import { LampsumError } from '#shared/errors'
import { databaseErrorCode, isDatabaseAway } from '../db/retry'

interface TusAnswer {
  status_code: number
  body: string
}

const sentences = new Map<unknown, string>([
  [ERRORS.FILE_NOT_FOUND, 'There is no upload here that you may go on with. Start a new one.'],
  [ERRORS.FILE_NO_LONGER_EXISTS, 'This upload was removed. Start a new one.'],
  [ERRORS.INVALID_OFFSET, 'The server holds another number of bytes. Ask for the offset with HEAD, then go on from there.'],
  [ERRORS.ERR_SIZE_EXCEEDED, 'More bytes came than the upload’s size allows. Start a new upload for another file.'],
  [ERRORS.INVALID_LENGTH, 'Give the file’s size in Upload-Length. An upload of unknown size is not accepted.'],
  [ERRORS.UNSUPPORTED_CREATION_DEFER_LENGTH_EXTENSION, 'Give the file’s size in Upload-Length. An upload of unknown size is not accepted.'],
  [ERRORS.UNSUPPORTED_CONCATENATION_EXTENSION, 'Parallel parts are not supported. Send the file in one upload.'],
  [ERRORS.ABORTED, 'Another request took this upload over. Ask for the offset with HEAD, then go on from there.'],
])
/** Refusals of the protocol whose stock status is not the one a client acts well on. */
const statuses = new Map<unknown, number>([[ERRORS.UNSUPPORTED_CREATION_DEFER_LENGTH_EXTENSION, 400]])

/** tus clients forget an upload and start afresh when HEAD fails with 5xx; 423 makes them wait and ask again. */
export const askAgainStatus = 423

/** The answer to a failed tus request: a status that clients act on rightly, and a sentence. */
export function describeTusError(error: unknown, method: string): TusAnswer {
  const sentence = sentences.get(error)
  if (sentence) return { status_code: statuses.get(error) ?? (error as TusAnswer).status_code, body: `${sentence}\n` }
  if (error instanceof LampsumError) return { status_code: error.status, body: `${error.message}\n` }
  const code = databaseErrorCode(error)
  if (code === 'ENOSPC' || code === 'EDQUOT') return fromCode('disk-full', error)
  if (isDatabaseAway(error)) return { ...fromCode('database-away', error), ...(method === 'HEAD' && { status_code: askAgainStatus }) }
  if (isTusAnswer(error)) return error
  console.error('[uploads]', error)
  return fromCode('server-error', error)
}

function fromCode(code: 'disk-full' | 'database-away' | 'server-error', cause: unknown): TusAnswer {
  const { status, message } = new LampsumError(code, undefined, { cause })
  return { status_code: status, body: `${message}\n` }
}

const isTusAnswer = (error: unknown): error is TusAnswer => typeof (error as TusAnswer | null)?.status_code === 'number' && typeof (error as TusAnswer).body === 'string'
