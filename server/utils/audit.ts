import type { Database, Transaction } from '../db/client'
import { auditEntries } from '../db/schema'

export interface AuditEntry {
  /** Who did it; null when nobody was signed in. */
  userId: string | null
  /** What was done, in the past tense: "person invited". */
  action: string
  /** The id of what it was done to. */
  subject?: string
  /** Never passwords, tokens or links. */
  details?: Record<string, unknown>
}

/** Adds a line to the audit; give the transaction of the change itself, so that neither is there without the other. */
export async function writeAudit(database: Database | Transaction, entry: AuditEntry): Promise<void> {
  await database.insert(auditEntries).values({ userId: entry.userId, action: entry.action, subject: entry.subject ?? null, details: entry.details ?? {}, createdAt: new Date() })
}
