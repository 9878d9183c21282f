import { eq } from 'drizzle-orm'
import { LampsumError } from '#shared/errors'
import type { User } from '#shared/schemas/people'
import type { Database } from '../db/client'
import { users } from '../db/schema'
import { writeAudit } from './audit'
import { passwordFits } from './passwords'
import { createRateLimiter } from './rateLimit'

const perPersonAndAddress = createRateLimiter({ attempts: 8, windowMs: 60_000 })
/** Against trying one password on many people. */
const perAddress = createRateLimiter({ attempts: 100, windowMs: 60_000 })

export interface SignIn {
  email: string
  password: string
  address: string
}

/** The person of an e-mail and password. Unknown, invited, disabled and wrong all answer alike and after the same work. */
export async function signIn(database: Database, { email, password, address }: SignIn, { demo }: { demo: boolean }): Promise<User> {
  const key = `${email} ${address}`
  perPersonAndAddress.count(key)
  perAddress.count(address)
  const [row] = await database.select().from(users).where(eq(users.email, email))
  const may = row !== undefined && row.disabledAt === null && (demo || !row.demo)
  if (!await passwordFits(may ? row.passwordHash : null, password) || !row) throw new LampsumError('wrong-credentials')
  perPersonAndAddress.forget(key)
  perAddress.forget(address)
  await writeAudit(database, { userId: row.id, action: 'signed in', subject: row.id })
  return { id: row.id, email: row.email, name: row.name, role: row.role }
}
