import { errorCatalogue, type ErrorBody, type ErrorCode } from '#shared/errors'

/** Why a request did not work, as a sentence for the person, with the fields it is about. */
export class ApiProblem extends Error {
  override name = 'ApiProblem'
  constructor(readonly code: ErrorCode | 'unreachable', message: string, readonly status: number, readonly fields: Record<string, string> = {}, options?: ErrorOptions) {
    super(message, options)
  }
}

const unreachable = 'The server does not answer. Check the network; nothing you typed is lost, so try again in a moment.'

function isErrorBody(value: unknown): value is ErrorBody {
  return typeof value === 'object' && value !== null && typeof (value as ErrorBody).message === 'string' && (value as ErrorBody).code in errorCatalogue
}

function codeOfStatus(status: number): ErrorCode {
  if (status === 401) return 'sign-in-needed'
  if (status === 403) return 'not-allowed'
  if (status === 404) return 'not-found'
  return 'server-error'
}

/** Any failure of a fetch to a problem with a sentence: the API's own when it gave one. */
export function toProblem(cause: unknown): ApiProblem {
  if (cause instanceof ApiProblem) return cause
  const failure = cause as { status?: number, statusCode?: number, data?: { data?: unknown } & Partial<ErrorBody> } | undefined
  const body = [failure?.data?.data, failure?.data].find(isErrorBody)
  const status = failure?.statusCode ?? failure?.status ?? 0
  if (body) return new ApiProblem(body.code, body.message, status || errorCatalogue[body.code][0], body.fields, { cause })
  if (!status) return new ApiProblem('unreachable', unreachable, 0, {}, { cause })
  const code = codeOfStatus(status)
  return new ApiProblem(code, errorCatalogue[code][1], status, {}, { cause })
}
