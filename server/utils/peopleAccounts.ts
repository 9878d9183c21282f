import { randomUUID } from 'node:crypto'
import { eq } from 'drizzle-orm'
import type { Role } from '#shared/permissions'
import type { Database } from '../db/client'
import { isDuplicateKey } from '../db/retry'
import { users } from '../db/schema'
import { writeAudit } from './audit'
import { passwordFits } from './passwords'

export const demoDomain = 'demo.lampsum.example'

/** Invented people of an invented laboratory, one a role. */
const demoPeople: Record<Role, string> = {
  technician: 'Tilda Brandeck',
  analyst: 'Anselm Orrowby',
  operator: 'Odile Marrenz',
  admin: 'Adair Velmont',
  guest: 'Gisela Thornquay',
}

export interface FirstAccounts {
  adminEmail: string
  adminPassword: string
  demo: boolean
  demoPassword: string
}

/** Makes the admin of the environment if absent and, in demo mode, the demo accounts. Running it again changes nothing. */
export async function ensureAccounts(database: Database, { adminEmail, adminPassword, demo, demoPassword }: FirstAccounts): Promise<void> {
  if (adminEmail) await ensureAdmin(database, adminEmail.trim().toLowerCase(), adminPassword)
  if (!demo || !demoPassword) return
  for (const [role, name] of Object.entries(demoPeople)) await ensureDemoPerson(database, role as Role, name, demoPassword)
}

async function ensureAdmin(database: Database, email: string, password: string): Promise<void> {
  const [present] = await database.select({ id: users.id }).from(users).where(eq(users.email, email))
  if (present) return
  await insertPerson(database, { email, name: 'Admin', role: 'admin', password, demo: false })
}

async function ensureDemoPerson(database: Database, role: Role, name: string, password: string): Promise<void> {
  const email = `${role}@${demoDomain}`
  const [present] = await database.select().from(users).where(eq(users.email, email))
  if (!present) return insertPerson(database, { email, name, role, password, demo: true })
  // Whatever visitors changed: what the start command prints must work.
  const passwordHash = await passwordFits(present.passwordHash, password) ? present.passwordHash : await hashPassword(password)
  await database.update(users).set({ name, role, passwordHash, disabledAt: null, demo: true }).where(eq(users.id, present.id))
}

interface NewPerson { email: string, name: string, role: Role, password: string, demo: boolean }

async function insertPerson(database: Database, { email, name, role, password, demo }: NewPerson): Promise<void> {
  const id = randomUUID()
  const passwordHash = await hashPassword(password)
  try {
    await database.insert(users).values({ id, email, name, role, passwordHash, demo, createdAt: new Date() })
  } catch (error) {
    // Another web server on the same database was first.
    if (isDuplicateKey(error)) return
    throw error
  }
  await writeAudit(database, { userId: null, action: 'account made at start', subject: id, details: { email, role, demo } })
}
