import { and, eq, gt, isNull } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { Database, Transaction } from '../db/client'
import { accountLinks, sessions, users } from '../db/schema'
import { writeAudit } from './audit'
import { createRateLimiter } from './rateLimit'
import { hashSecret, newSecret } from './tokens'
import { sendMail } from './mail'
import { invitationMail, resetMail } from './mailTexts'

export type LinkKind = 'invitation' | 'reset'
const lifetimeMs = { invitation: 7 * 24 * 3600_000, reset: 3600_000 } as const satisfies Record<LinkKind, number>
const pageOf = { invitation: 'welcome', reset: 'new-password' } as const satisfies Record<LinkKind, string>

/** Makes a one-time link; those of the same person made before stop working. */
export async function createLink(database: Database, userId: string, kind: LinkKind, publicUrl: string, now = new Date()): Promise<string> {
  const token = newSecret()
  await database.transaction(async (transaction) => {
    await spendLinks(transaction, userId, now)
    await transaction.insert(accountLinks).values({ tokenHash: hashSecret(token), kind, userId, createdAt: now, expiresAt: new Date(now.getTime() + lifetimeMs[kind]) })
  })
  return `${publicUrl.replace(/\/$/, '')}/${pageOf[kind]}?token=${token}`
}

export async function spendLinks(transaction: Transaction, userId: string, now = new Date()): Promise<void> {
  await transaction.update(accountLinks).set({ usedAt: now }).where(and(eq(accountLinks.userId, userId), isNull(accountLinks.usedAt)))
}

const fresh = (tokenHash: string, now: Date) => and(eq(accountLinks.tokenHash, tokenHash), isNull(accountLinks.usedAt), gt(accountLinks.expiresAt, now))

/** What a link is for; LampsumError('link-expired') for one that is unknown, used, run out or of a disabled person. */
export async function readLink(database: Database, token: string, now = new Date()) {
  const [row] = await database.select({ kind: accountLinks.kind, userId: users.id, email: users.email, name: users.name }).from(accountLinks)
    .innerJoin(users, eq(users.id, accountLinks.userId)).where(and(fresh(hashSecret(token), now), isNull(users.disabledAt)))
  if (!row) throw new LampsumError('link-expired')
  return row
}

/** Sets the password once. Every session of the person ends: whoever knew the old password is out. */
export async function acceptLink(database: Database, { token, password, name }: { token: string, password: string, name?: string }): Promise<void> {
  const { kind, userId } = await readLink(database, token)
  const passwordHash = await hashPassword(password)
  await database.transaction(async (transaction) => {
    const now = new Date()
    const [spent] = await transaction.update(accountLinks).set({ usedAt: now }).where(fresh(hashSecret(token), now))
    if (!spent.affectedRows) throw new LampsumError('link-expired')
    await spendLinks(transaction, userId, now)
    await transaction.update(users).set({ passwordHash, ...(kind === 'invitation' && name ? { name } : {}) }).where(eq(users.id, userId))
    await transaction.delete(sessions).where(eq(sessions.userId, userId))
    await writeAudit(transaction, { userId, action: kind === 'invitation' ? 'invitation accepted' : 'password changed', subject: userId })
  })
}

const resetRequests = createRateLimiter({ attempts: 5, windowMs: 10 * 60_000 })

/** Sends a link when the e-mail belongs to somebody; answers the same, and at once, when it does not. */
export async function requestReset(database: Database, { email, address }: { email: string, address: string }, { publicUrl, demo }: { publicUrl: string, demo: boolean }): Promise<void> {
  resetRequests.count(`${email} ${address}`)
  void sendReset(database, email, publicUrl, demo).catch(error => console.error('[mail] A password link could not be sent:', error))
}

async function sendReset(database: Database, email: string, publicUrl: string, demo: boolean): Promise<void> {
  const [person] = await database.select().from(users).where(and(eq(users.email, email), isNull(users.disabledAt)))
  if (!person || (person.demo && !demo)) return
  await sendLink(database, person, publicUrl)
}

/** An invitation for somebody who has no password yet, else a password link. */
export async function sendLink(database: Database, person: typeof users.$inferSelect, publicUrl: string): Promise<LinkKind> {
  const kind: LinkKind = person.passwordHash === null ? 'invitation' : 'reset'
  const link = await createLink(database, person.id, kind, publicUrl)
  await sendMail({ to: { name: person.name, address: person.email }, ...(kind === 'invitation' ? invitationMail(person.name, link) : resetMail(person.name, link)) })
  return kind
}
