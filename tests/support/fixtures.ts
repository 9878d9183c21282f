import { randomUUID } from 'node:crypto'
import type { Database } from '../../server/db/client'
import { acquisitions, campaigns, uploads, users } from '../../server/db/schema'
import type { Role } from '../../shared/permissions'

let counter = 0

/** Rows that many database tests need; every call makes new ones. */
export async function insertUser(database: Database, role: Role = 'analyst'): Promise<string> {
  const id = randomUUID()
  await database.insert(users).values({ id, email: `${id}@lab.example`, name: `The ${role}`, role, demo: false, createdAt: new Date() })
  return id
}

export async function insertCampaign(database: Database, createdBy: string, name = 'Housing cover HC-2'): Promise<string> {
  const id = randomUUID()
  const now = new Date()
  await database.insert(campaigns).values({ id, name, createdBy, createdAt: now, updatedAt: now })
  return id
}

export async function insertAcquisition(database: Database, campaignId: string, createdBy: string, changes: Partial<typeof acquisitions.$inferInsert> = {}): Promise<string> {
  const id = randomUUID()
  const now = new Date()
  await database.insert(acquisitions).values({
    id, number: ++counter, campaignId, title: `take ${counter}`, transfer: 'auto', range: 'auto', guardSeconds: 0.001, plan: [], autoRun: true, channels: null,
    createdBy, createdAt: now, updatedAt: now, ...changes,
  })
  return id
}

export async function insertStoredUpload(database: Database, acquisitionId: string, userId: string, kind: 'clip' | 'record'): Promise<string> {
  const id = randomUUID()
  const now = new Date()
  await database.insert(uploads).values({
    id, acquisitionId, userId, kind, part: 1, filename: kind === 'clip' ? 'take.mp4' : 'take.csv', bytes: 1000, receivedBytes: 1000, state: 'stored',
    sha256: id.replaceAll('-', '').padEnd(64, '0'), fileKey: `uploads/${id}`, createdAt: now, lastActivityAt: now, storedAt: now,
  })
  return id
}
