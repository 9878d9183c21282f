import { createHash, randomBytes, randomUUID } from 'node:crypto'
import { and, desc, eq, isNull, lt, or } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { ApiToken } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { apiTokens } from '../db/schema'
import { writeAudit } from './audit'

/** 32 random bytes, for session secrets, links and tokens; only their hash is stored. */
export const newSecret = () => randomBytes(32).toString('base64url')

/** SHA-256 is enough here: a secret of 256 random bits cannot be guessed, unlike a password. */
export const hashSecret = (secret: string) => createHash('sha256').update(secret).digest('hex')

export async function createToken(database: Database, userId: string, name: string): Promise<{ id: string, token: string }> {
  const id = randomUUID()
  const token = `lampsum_${newSecret()}`
  await database.insert(apiTokens).values({ id, userId, name, tokenHash: hashSecret(token), createdAt: new Date() })
  await writeAudit(database, { userId, action: 'token made', subject: id, details: { name } })
  return { id, token }
}

/** The tokens of a person that still count, newest first. */
export async function listTokens(database: Database, userId: string, { limit, cursor }: { limit: number, cursor?: string }): Promise<{ items: ApiToken[], nextCursor: string | null }> {
  const [time, lastId] = cursor?.split('.') ?? []
  const before = new Date(Number(time))
  const after = cursor ? or(lt(apiTokens.createdAt, before), and(eq(apiTokens.createdAt, before), lt(apiTokens.id, lastId ?? ''))) : undefined
  if (cursor && Number.isNaN(before.getTime())) throw new LampsumError('bad-input', undefined, { fields: { cursor: 'Use the nextCursor of the list before.' } })
  const rows = await database.select().from(apiTokens).where(and(eq(apiTokens.userId, userId), isNull(apiTokens.revokedAt), after))
    .orderBy(desc(apiTokens.createdAt), desc(apiTokens.id)).limit(limit + 1)
  const page = rows.slice(0, limit)
  const last = page.at(-1)
  return {
    items: page.map(row => ({ id: row.id, name: row.name, createdAt: row.createdAt.toISOString(), lastUsedAt: row.lastUsedAt?.toISOString() ?? null })),
    nextCursor: rows.length > limit && last ? `${last.createdAt.getTime()}.${last.id}` : null,
  }
}

/** Only the owner's own; another person's token answers as if it were not there. */
export async function revokeToken(database: Database, userId: string, id: string): Promise<void> {
  const [result] = await database.update(apiTokens).set({ revokedAt: new Date() }).where(and(eq(apiTokens.id, id), eq(apiTokens.userId, userId), isNull(apiTokens.revokedAt)))
  if (!result.affectedRows) throw new LampsumError('not-found')
  await writeAudit(database, { userId, action: 'token revoked', subject: id })
}
