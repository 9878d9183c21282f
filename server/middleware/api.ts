import { LampsumError } from '#shared/errors'

/** What holds for every call of the API, before its route runs. */
export default defineEventHandler(async (event) => {
  const path = event.path.split('?')[0]!
  if (path !== '/api' && !path.startsWith('/api/')) return
  try {
    setResponseHeader(event, 'cache-control', 'private, no-store')
    if (!isKnownRoute(event.method, path)) throw new LampsumError('not-found')
    // A bearer token is never sent by a browser on its own.
    if (bearerToken(event) === null) {
      refuseCrossSite({
        method: event.method, fetchSite: getRequestHeader(event, 'sec-fetch-site'), origin: getRequestHeader(event, 'origin'),
        host: getRequestHeader(event, 'host'), publicUrl: useRuntimeConfig().publicUrl,
      })
    }
    if (!path.startsWith('/api/uploads')) await limitBody(event, largestJsonBytes)
  } catch (error) {
    throw toApiError(error, event)
  }
})
