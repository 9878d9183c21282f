import { statfs } from 'node:fs/promises'
import { and, gt, isNull, sql } from 'drizzle-orm'
import type { z } from 'zod'
import type { healthSchema } from '#shared/schemas/results'
import { version } from '../../package.json'
import type { Database } from '../db/client'
import { runners } from '../db/schema'

type Health = z.infer<typeof healthSchema>

const runnerAliveSeconds = 15
const patienceMs = 2000

/** True once the accounts of the first start are there. */
let started = false
export const markStarted = () => void (started = true)

/** Never throws: what cannot be read is reported as away. */
export async function readHealth(database: Database): Promise<Health> {
  const [runnerCount, diskFreeBytes] = await Promise.all([within(countRunners(database)), within(freeBytes(useRuntimeConfig().dataDir))])
  const databaseState = runnerCount === null ? 'away' : 'ok'
  const well = databaseState === 'ok' && (runnerCount ?? 0) > 0 && diskFreeBytes !== null
  return { status: !started ? 'starting' : well ? 'ok' : 'degraded', database: databaseState, runners: runnerCount ?? 0, diskFreeBytes: diskFreeBytes ?? 0, version }
}

async function countRunners(database: Database): Promise<number> {
  const [row] = await database.select({ count: sql<number>`COUNT(*)`.mapWith(Number) }).from(runners)
    .where(and(isNull(runners.stoppedAt), gt(runners.beatAt, new Date(Date.now() - runnerAliveSeconds * 1000))))
  return row?.count ?? 0
}

async function freeBytes(path: string): Promise<number> {
  const { bavail, bsize } = await statfs(path)
  return bavail * bsize
}

/** The answer, or null when it fails or takes too long. */
async function within<T>(work: Promise<T>): Promise<T | null> {
  let timer: NodeJS.Timeout | undefined
  const tooLate = new Promise<null>((resolve) => {
    timer = setTimeout(() => resolve(null), patienceMs)
  })
  return Promise.race([work.catch(() => null), tooLate]).finally(() => clearTimeout(timer))
}
