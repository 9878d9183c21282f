import { randomBytes } from 'node:crypto'
import { existsSync, mkdirSync, readFileSync, renameSync, statfsSync, writeFileSync } from 'node:fs'
import { dirname, join, resolve } from 'node:path'
import { fileURLToPath } from 'node:url'

export const projectRoot = resolve(dirname(fileURLToPath(import.meta.url)), '..', '..')

export interface Settings {
  port: number
  host: string
  dataDir: string
  demo: boolean
  publicUrl: string
  adminEmail: string
  adminPassword: string
}

/** A sentence for the person at the terminal; no stack is shown for it. */
export class StartError extends Error {
  override name = 'StartError'
}

export function readSettings(env = process.env): Settings {
  const port = Number(env.PORT || 3000)
  if (!Number.isInteger(port) || port < 1 || port > 65535) throw new StartError(`PORT is “${env.PORT}”, which is no port. Set PORT to a number from 1 to 65535.`)
  if (env.LAMPSUM_ADMIN_EMAIL && (env.LAMPSUM_ADMIN_PASSWORD ?? '').length < 12) throw new StartError('LAMPSUM_ADMIN_PASSWORD is missing or short. Give the first admin a password of at least 12 characters.')
  return {
    port,
    host: env.HOST || '127.0.0.1',
    dataDir: resolve(projectRoot, env.LAMPSUM_DATA_DIR || '.data'),
    demo: (env.LAMPSUM_DEMO ?? '1') !== '0',
    publicUrl: env.LAMPSUM_PUBLIC_URL || `http://127.0.0.1:${port}`,
    adminEmail: env.LAMPSUM_ADMIN_EMAIL || '',
    adminPassword: env.LAMPSUM_ADMIN_PASSWORD || '',
  }
}

export interface Secrets {
  databasePassword: string
  sessionPassword: string
  demoPassword: string
}

/** Made at the first start, kept in the data directory, readable by its owner only, never in git. */
export function readSecrets(dataDir: string): Secrets {
  const path = join(dataDir, 'secrets.json')
  if (existsSync(path)) {
    try {
      return JSON.parse(readFileSync(path, 'utf8')) as Secrets
    } catch {
      throw new StartError(`${path} cannot be read. Restore it from a backup; without it the database stays closed.`)
    }
  }
  const secret = () => randomBytes(24).toString('base64url')
  const secrets: Secrets = { databasePassword: secret(), sessionPassword: `${secret()}${secret()}`, demoPassword: `demo-${randomBytes(6).toString('hex')}` }
  writeFileSync(`${path}.new`, JSON.stringify(secrets, null, 2), { mode: 0o600 })
  renameSync(`${path}.new`, path)
  return secrets
}

/** Makes the data directory and its folders, or says in a sentence why it cannot. */
export function prepareDataDir(dataDir: string): void {
  try {
    for (const folder of ['', 'store', 'incoming', 'work', 'mail', 'logs', 'run']) mkdirSync(join(dataDir, folder), { recursive: true, mode: 0o700 })
    writeFileSync(join(dataDir, 'run', 'writable'), 'Lampsum can write here.\n')
    requireSpace(dataDir)
  } catch (error) {
    throw dataDirError(dataDir, error)
  }
}

/** MariaDB's own files take about 100 MB; with less its first start fails half-way. */
const leastFreeBytes = 200 * 2 ** 20

function requireSpace(dataDir: string): void {
  const { bavail, bsize } = statfsSync(dataDir)
  if (bavail * bsize < leastFreeBytes) throw diskFull(dataDir)
}

const diskFull = (dataDir: string) => new StartError(`The disk that holds ${dataDir} is full. Free some space, or set LAMPSUM_DATA_DIR to a folder on another disk.`)

export function dataDirError(dataDir: string, error: unknown): Error {
  const code = (error as NodeJS.ErrnoException).code
  if (code === 'ENOSPC' || code === 'EDQUOT') return diskFull(dataDir)
  if (code === 'EACCES' || code === 'EPERM' || code === 'EROFS') return new StartError(`${dataDir} cannot be written. Give this user the right to write there, or set LAMPSUM_DATA_DIR to another folder.`)
  if (code === 'ENOTDIR' || code === 'EEXIST') return new StartError(`${dataDir} is not a folder. Set LAMPSUM_DATA_DIR to a folder of Lampsum's own.`)
  return error as Error
}
