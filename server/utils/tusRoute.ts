import type { IncomingMessage } from 'node:http'
import { isError, type H3Event } from 'h3'
import type { ErrorBody } from '#shared/errors'
import type { RouteKey } from '#shared/routes'
import type { User } from '#shared/schemas/people'
import { storeFolders } from '../store/fileStore'
import { useDatabase } from './database'
import { useFileStore } from './files'
import { askAgainStatus } from './tusErrors'
import { TusServer } from './tusServer'

const protocolVersion = '1.0.0'
const users = new WeakMap<IncomingMessage, User>()
let server: TusServer | undefined

function useTusServer(): TusServer {
  server ??= new TusServer({
    folder: storeFolders(useRuntimeConfig().dataDir).incoming, database: useDatabase, freeBytes: () => useFileStore().freeBytes(),
    userOf: request => users.get(request)!,
  })
  return server
}

/** A route of the tus protocol, with the role and session checks of every other route. */
export function defineTusRoute<K extends Extract<RouteKey, `${string} /api/uploads${string}`>>(key: K) {
  const route = defineRoute(key, async ({ event, user }) => {
    if (user) users.set(event.node.req, user)
    if (event.method !== 'OPTIONS' && getRequestHeader(event, 'tus-resumable') !== protocolVersion) return refuseVersion(event) as never
    return useTusServer().handle(event.node.req, event.node.res) as never
  })
  return defineEventHandler(async (event) => {
    try {
      return await route(event)
    } catch (error) {
      if (event.method === 'HEAD' && isError<ErrorBody>(error) && error.data?.code === 'database-away') return answerLocked(event)
      throw error
    }
  })
}

/** "If the version specified by the Client is not supported by the Server, it MUST respond with the 412 Precondition Failed status and MUST include the Tus-Version header" (tus 1.0.0, Tus-Resumable). */
function refuseVersion(event: H3Event): string {
  setResponseStatus(event, 412)
  setResponseHeaders(event, { 'tus-version': protocolVersion, 'content-type': 'text/plain' })
  return `This server speaks tus ${protocolVersion}. Send the header “Tus-Resumable: ${protocolVersion}”.`
}

/** As describeTusError: no client may take a database that is away for an upload that is gone. */
function answerLocked(event: H3Event): null {
  setResponseStatus(event, askAgainStatus)
  setResponseHeaders(event, { 'tus-resumable': '1.0.0', 'retry-after': 2 })
  return null
}
