import { desc, eq } from 'drizzle-orm'
import type { Transaction } from '../../server/db/client'
import { alignments } from '../../server/db/schema'
import type { AlignmentEvidence } from '../../shared/measurement'

export interface FoundAlignment {
  offsetSeconds: number
  driftPpm: number
  residual: number
  confidence: number
  evidence: AlignmentEvidence
}

/** Stores an alignment that was found by the light as a new version, unless the newest one is the same. Answers its version. */
export async function publishAlignment(transaction: Transaction, acquisitionId: string, found: FoundAlignment, accepted: boolean): Promise<number> {
  const [newest] = await transaction.select().from(alignments).where(eq(alignments.acquisitionId, acquisitionId)).orderBy(desc(alignments.version)).limit(1).for('update')
  if (newest?.method === 'light' && newest.accepted === accepted && newest.offsetSeconds === found.offsetSeconds && newest.driftPpm === found.driftPpm) return newest.version
  const version = (newest?.version ?? 0) + 1
  await transaction.insert(alignments).values({ acquisitionId, version, ...found, method: 'light', accepted, authorId: null, createdAt: new Date() })
  return version
}
