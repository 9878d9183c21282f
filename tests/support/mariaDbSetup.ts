import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import type { TestProject } from 'vitest/node'
import { startMariaDb } from '../../scripts/lib/mariadb'

/** Starts one MariaDB for all database tests of a run. */
export default async function setup(project: TestProject) {
  const dataDir = mkdtempSync(join(tmpdir(), 'lampsum-db-'))
  const mariaDb = await startMariaDb({ dataDir, password: 'for-tests-only', allDatabases: true })
  project.provide('mariaDbUrl', mariaDb.url())
  return async () => {
    await mariaDb.stop()
    rmSync(dataDir, { recursive: true, force: true })
  }
}
