import { drizzle, type MySql2Database } from 'drizzle-orm/mysql2'
import mysql from 'mysql2/promise'
import * as schema from './schema'

export type Database = MySql2Database<typeof schema>
/** What runs inside `database.transaction`. */
export type Transaction = Parameters<Parameters<Database['transaction']>[0]>[0]

export interface DatabaseHandle {
  database: Database
  close: () => Promise<void>
}

/** Opens a pool on `mysql://…?socketPath=…`. Drizzle's relational queries need `planetscale` mode: MariaDB has no LATERAL. */
export function openDatabase(url: string, connections = 8): DatabaseHandle {
  const pool = mysql.createPool({ uri: url, connectionLimit: connections, supportBigNumbers: true, timezone: 'Z', charset: 'utf8mb4', enableKeepAlive: true })
  pool.pool.on('connection', (connection) => {
    // One statement sees what other processes have just committed; claims and compare-and-set rely on it.
    connection.query('SET SESSION TRANSACTION ISOLATION LEVEL READ COMMITTED')
  })
  return { database: drizzle(pool, { schema, mode: 'planetscale' }), close: () => pool.end() }
}
