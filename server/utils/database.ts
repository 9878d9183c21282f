import { openDatabase, type Database, type DatabaseHandle } from '../db/client'

let handle: DatabaseHandle | undefined

/** The web server's one database pool. */
export function useDatabase(): Database {
  handle ??= openDatabase(useRuntimeConfig().databaseUrl, 16)
  return handle.database
}

export async function closeDatabase(): Promise<void> {
  const open = handle
  handle = undefined
  await open?.close()
}
