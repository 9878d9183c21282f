import { randomBytes } from 'node:crypto'
import { join } from 'node:path'
import mysql from 'mysql2/promise'
import { inject } from 'vitest'
import { openDatabase, type DatabaseHandle } from '../../server/db/client'
import { migrateDatabase } from '../../server/db/migrate'
import { projectRoot } from '../../scripts/lib/settings'

declare module 'vitest' {
  interface ProvidedContext {
    mariaDbUrl: string
  }
}

/** A fresh, migrated database on the real MariaDB that the `db` test project has started. */
export async function openTestDatabase(): Promise<DatabaseHandle & { url: string }> {
  const base = inject('mariaDbUrl')
  const name = `lampsum_${randomBytes(6).toString('hex')}`
  const connection = await mysql.createConnection(base)
  await connection.query(`CREATE DATABASE ${name} CHARACTER SET utf8mb4`)
  await connection.end()
  const url = base.replace('/lampsum?', `/${name}?`)
  const handle = openDatabase(url, 20)
  await migrateDatabase(handle.database, join(projectRoot, 'server', 'db', 'migrations'))
  return { ...handle, url }
}
