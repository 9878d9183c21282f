const retryable = new Set(['ER_LOCK_DEADLOCK', 'ER_LOCK_WAIT_TIMEOUT', 'ER_CHECKREAD'])

/** The driver's code, wherever drizzle has wrapped it. */
export function databaseErrorCode(error: unknown): string | undefined {
  for (let current = error; current instanceof Error; current = current.cause) {
    const code = (current as { code?: unknown }).code
    if (typeof code === 'string') return code
  }
  return undefined
}

export const isDuplicateKey = (error: unknown) => databaseErrorCode(error) === 'ER_DUP_ENTRY'

const connectionCodes = new Set(['ECONNREFUSED', 'ENOENT', 'ECONNRESET', 'EPIPE', 'PROTOCOL_CONNECTION_LOST', 'ER_SERVER_SHUTDOWN', 'ETIMEDOUT', 'ER_CON_COUNT_ERROR'])
export const isDatabaseAway = (error: unknown) => connectionCodes.has(databaseErrorCode(error) ?? '')

/** Runs `work` again when MariaDB gave up on a lock (1205, 1213, 1020): nothing was written in that case. */
export async function withRetry<T>(work: () => Promise<T>, attempts = 8): Promise<T> {
  for (let attempt = 1; ; attempt++) {
    try {
      return await work()
    } catch (error) {
      if (attempt >= attempts || !retryable.has(databaseErrorCode(error) ?? '')) throw error
      await new Promise(resolve => setTimeout(resolve, 5 * 2 ** attempt * Math.random()))
    }
  }
}
