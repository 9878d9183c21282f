import { randomUUID } from 'node:crypto'
import { and, asc, eq, gt, isNotNull, isNull, sql } from 'drizzle-orm'
import type { z } from 'zod'
import { LampsumError } from '#shared/errors'
import type { inviteSchema, Person, personPatchSchema } from '#shared/schemas/people'
import type { Database, Transaction } from '../db/client'
import { isDuplicateKey, withRetry } from '../db/retry'
import { apiTokens, sessions, users } from '../db/schema'
import { writeAudit } from './audit'
import { sendLink, spendLinks } from './peopleLinks'

type UserRow = typeof users.$inferSelect

/** Everybody, by e-mail; the cursor is the last e-mail of the page before. */
export async function listPeople(database: Database, { limit, cursor }: { limit: number, cursor?: string }): Promise<{ items: Person[], nextCursor: string | null }> {
  const seenBySession = database.select({ at: sql`MAX(${sessions.lastSeenAt})` }).from(sessions).where(eq(sessions.userId, users.id))
  const seenByToken = database.select({ at: sql`MAX(${apiTokens.lastUsedAt})` }).from(apiTokens).where(eq(apiTokens.userId, users.id))
  const rows = await database.select({ user: users, session: sql<Date | null>`(${seenBySession})`.mapWith(sessions.lastSeenAt), token: sql<Date | null>`(${seenByToken})`.mapWith(apiTokens.lastUsedAt) })
    .from(users).where(cursor ? gt(users.email, cursor) : undefined).orderBy(asc(users.email)).limit(limit + 1)
  const items = rows.slice(0, limit).map(({ user, session, token }): Person => ({
    id: user.id, email: user.email, name: user.name, role: user.role, demo: user.demo, state: stateOf(user),
    createdAt: user.createdAt.toISOString(), lastSeenAt: latest(session, token)?.toISOString() ?? null,
  }))
  return { items, nextCursor: rows.length > limit ? items.at(-1)!.email : null }
}

const latest = (a: Date | null, b: Date | null) => a && b ? (a > b ? a : b) : a ?? b

function stateOf(user: UserRow): Person['state'] {
  if (user.disabledAt) return 'disabled'
  return user.passwordHash === null ? 'invited' : 'active'
}

/** Makes the account and sends the invitation. */
export async function invitePerson(database: Database, actorId: string, { email, name, role }: z.output<typeof inviteSchema>, publicUrl: string): Promise<string> {
  const person = { id: randomUUID(), email, name, role, passwordHash: null, demo: false, disabledAt: null, createdAt: new Date() }
  try {
    await database.transaction(async (transaction) => {
      await transaction.insert(users).values(person)
      await writeAudit(transaction, { userId: actorId, action: 'person invited', subject: person.id, details: { email, role } })
    })
  } catch (error) {
    if (isDuplicateKey(error)) throw new LampsumError('email-taken', undefined, { fields: { email: 'Somebody with this e-mail exists already.' }, cause: error })
    throw error
  }
  await sendOrExplain(database, person, publicUrl)
  return person.id
}

/** Sends the invitation, or to somebody who has a password a link for a new one. */
export async function resendLink(database: Database, actorId: string, id: string, publicUrl: string): Promise<void> {
  const [person] = await database.select().from(users).where(eq(users.id, id))
  if (!person) throw new LampsumError('not-found')
  if (person.disabledAt) throw new LampsumError('wrong-state', 'This person is disabled. Enable the account first, then send the link.')
  const kind = await sendOrExplain(database, person, publicUrl)
  await writeAudit(database, { userId: actorId, action: kind === 'invitation' ? 'invitation sent again' : 'password link sent', subject: id })
}

async function sendOrExplain(database: Database, person: UserRow, publicUrl: string) {
  try {
    return await sendLink(database, person, publicUrl)
  } catch (error) {
    throw new LampsumError('server-error', 'The account is there, but the mail could not be sent. Check the mail server’s address, then send the link again.', { cause: error })
  }
}

/** Changes name or role, disables or enables. A new role counts from the next request on; disabling ends every session. */
export async function changePerson(database: Database, actorId: string, id: string, patch: z.output<typeof personPatchSchema>, { demo }: { demo: boolean }): Promise<void> {
  await withRetry(() => database.transaction(async (transaction) => {
    // Locking the admins first makes two admins who demote each other wait for one another.
    const admins = await lockActiveAdmins(transaction, demo)
    const [person] = await transaction.select().from(users).where(eq(users.id, id)).for('update')
    if (!person) throw new LampsumError('not-found')
    const losesAdmin = patch.disabled === true || (patch.role !== undefined && patch.role !== 'admin')
    if (losesAdmin && admins.includes(id) && admins.length === 1) throw new LampsumError('last-admin')
    const disabledAt = patch.disabled === undefined ? person.disabledAt : patch.disabled ? person.disabledAt ?? new Date() : null
    await transaction.update(users).set({ name: patch.name ?? person.name, role: patch.role ?? person.role, disabledAt }).where(eq(users.id, id))
    if (patch.disabled) {
      await transaction.delete(sessions).where(eq(sessions.userId, id))
      await spendLinks(transaction, id)
    }
    await writeAudit(transaction, { userId: actorId, action: 'person changed', subject: id, details: { ...patch } })
  }))
}

async function lockActiveAdmins(transaction: Transaction, demo: boolean): Promise<string[]> {
  const rows = await transaction.select({ id: users.id }).from(users)
    .where(and(eq(users.role, 'admin'), isNull(users.disabledAt), isNotNull(users.passwordHash), ...(demo ? [] : [eq(users.demo, false)])))
    .orderBy(asc(users.id)).for('update')
  return rows.map(row => row.id)
}
