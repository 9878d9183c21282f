import { migrate } from 'drizzle-orm/mysql2/migrator'
import type { Database } from './client'

/** Applies the committed migrations. Run it from one process only: scripts/start.ts does, before anything else starts. */
export async function migrateDatabase(database: Database, migrationsFolder: string): Promise<void> {
  await migrate(database, { migrationsFolder })
}
