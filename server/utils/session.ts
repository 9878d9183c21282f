import { and, eq, gt, inArray, isNull } from 'drizzle-orm'
import type { H3Event } from 'h3'
import type { User } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { apiTokens, sessions, users } from '../db/schema'
import { isDemo } from './config'
import { hashSecret, newSecret } from './tokens'

/** What a caller proved who they are with: a row of `sessions` or of `api_tokens`. */
export interface Credential {
  kind: 'session' | 'token'
  id: string
}

export interface Caller {
  user: User
  credential: Credential
}

declare module 'h3' {
  interface H3EventContext {
    caller?: Promise<Caller | null>
  }
}
declare module '#auth-utils' {
  interface SecureSessionData {
    userId: string
    secret: string
  }
}

/** Who calls, by session cookie or bearer token; null when neither counts. The role is as fresh as the database. */
export async function findUser(event: H3Event): Promise<User | null> {
  return (await findCaller(event))?.user ?? null
}

export function findCaller(event: H3Event): Promise<Caller | null> {
  return event.context.caller ??= readCaller(event)
}

async function readCaller(event: H3Event): Promise<Caller | null> {
  const credential = await readCredential(event)
  if (!credential) return null
  const database = useDatabase()
  const found = (await findLiveCredentials(database, [credential], { demo: isDemo() })).get(credential.id)
  if (!found) return null
  await touchCredential(database, credential, found.usedAt)
  return { user: found.user, credential }
}

/** The credential of a request, not yet checked. A bearer token that is wrong never falls back to the cookie. */
async function readCredential(event: H3Event): Promise<Credential | null> {
  const token = bearerToken(event)
  if (token !== null) {
    const [row] = await useDatabase().select({ id: apiTokens.id }).from(apiTokens).where(eq(apiTokens.tokenHash, hashSecret(token)))
    return row ? { kind: 'token', id: row.id } : null
  }
  // Reading a session that is not there would make one and set a cookie.
  if (!getCookie(event, useRuntimeConfig().session.name!)) return null
  const { secure } = await getUserSession(event)
  return secure?.secret ? { kind: 'session', id: hashSecret(secure.secret) } : null
}

/** The token of `Authorization: Bearer …`, null when the request does not use one. */
export function bearerToken(event: H3Event): string | null {
  const match = /^Bearer\s+(.*)$/i.exec(getRequestHeader(event, 'authorization') ?? '')
  return match ? match[1]!.trim() : null
}

export interface LiveCredential {
  user: User
  usedAt: Date | null
}

/** Those of the credentials that still count: not ended, expired or revoked, and their person may still sign in. */
export async function findLiveCredentials(database: Database, credentials: Credential[], { demo, now = new Date() }: { demo: boolean, now?: Date }): Promise<Map<string, LiveCredential>> {
  const idsOf = (kind: Credential['kind']) => credentials.filter(each => each.kind === kind).map(each => each.id)
  const person = { id: users.id, email: users.email, name: users.name, role: users.role }
  const maySignIn = and(isNull(users.disabledAt), ...(demo ? [] : [eq(users.demo, false)]))
  const live = new Map<string, LiveCredential>()
  if (idsOf('session').length) {
    const rows = await database.select({ id: sessions.id, usedAt: sessions.lastSeenAt, user: person }).from(sessions)
      .innerJoin(users, eq(users.id, sessions.userId)).where(and(inArray(sessions.id, idsOf('session')), gt(sessions.expiresAt, now), maySignIn))
    for (const row of rows) live.set(row.id, row)
  }
  if (idsOf('token').length) {
    const rows = await database.select({ id: apiTokens.id, usedAt: apiTokens.lastUsedAt, user: person }).from(apiTokens)
      .innerJoin(users, eq(users.id, apiTokens.userId)).where(and(inArray(apiTokens.id, idsOf('token')), isNull(apiTokens.revokedAt), maySignIn))
    for (const row of rows) live.set(row.id, row)
  }
  return live
}

const touchAfterMs = 60_000

/** Notes when a credential was last used, at most once a minute. */
async function touchCredential(database: Database, credential: Credential, usedAt: Date | null, now = new Date()): Promise<void> {
  if (usedAt && now.getTime() - usedAt.getTime() < touchAfterMs) return
  if (credential.kind === 'session') await database.update(sessions).set({ lastSeenAt: now }).where(eq(sessions.id, credential.id))
  else await database.update(apiTokens).set({ lastUsedAt: now }).where(eq(apiTokens.id, credential.id))
}

/** Starts a session with a new secret; the one the browser had before ends. */
export async function startSession(event: H3Event, userId: string): Promise<void> {
  await endSession(event)
  const secret = newSecret()
  const now = new Date()
  const maxAgeSeconds = useRuntimeConfig().session.maxAge!
  await useDatabase().insert(sessions).values({
    id: hashSecret(secret), userId, createdAt: now, lastSeenAt: now, expiresAt: new Date(now.getTime() + maxAgeSeconds * 1000),
    userAgent: getRequestHeader(event, 'user-agent')?.slice(0, 255) ?? null,
  })
  // Otherwise h3 would go on with the session of the old cookie, and with its age.
  delete event.node.req.headers.cookie
  delete event.context.sessions
  await setUserSession(event, { secure: { userId, secret } })
}

/** Deletes the session's row, so that copies of its cookie die too, and clears the cookie. */
export async function endSession(event: H3Event): Promise<void> {
  if (!getCookie(event, useRuntimeConfig().session.name!)) return
  const { secure } = await getUserSession(event)
  if (secure?.secret) await useDatabase().delete(sessions).where(eq(sessions.id, hashSecret(secure.secret)))
  await clearUserSession(event)
}
