import { spawn, type ChildProcess } from 'node:child_process'
import { createWriteStream, existsSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { createServer } from 'node:net'
import { join } from 'node:path'
import { openDatabase } from '../../server/db/client'
import { migrateDatabase } from '../../server/db/migrate'
import { solveWorkerEntry } from './build'
import { startMariaDb, type MariaDb } from './mariadb'
import { dataDirError, prepareDataDir, projectRoot, readSecrets, StartError, type Secrets, type Settings } from './settings'

export interface Foundation {
  secrets: Secrets
  mariaDb: MariaDb
  databaseUrl: string
  release: () => void
}

/** Data directory, lock, secrets, MariaDB, migrations: what web server and runner stand on. */
export async function startFoundation(settings: Settings): Promise<Foundation> {
  await requireFreePort(settings)
  prepareDataDir(settings.dataDir)
  const release = lockDataDir(settings.dataDir)
  try {
    const secrets = readSecrets(settings.dataDir)
    const mariaDb = await startMariaDb({ dataDir: settings.dataDir, password: secrets.databasePassword })
    const databaseUrl = mariaDb.url()
    const handle = openDatabase(databaseUrl, 1)
    try {
      await migrateDatabase(handle.database, join(projectRoot, 'server', 'db', 'migrations'))
    } catch (error) {
      await mariaDb.stop()
      throw error
    } finally {
      await handle.close()
    }
    return { secrets, mariaDb, databaseUrl, release }
  } catch (error) {
    release()
    throw dataDirError(settings.dataDir, error)
  }
}

function requireFreePort({ port, host }: Settings): Promise<void> {
  return new Promise((resolve, reject) => {
    const probe = createServer()
    probe.once('error', (error: NodeJS.ErrnoException) => {
      if (error.code === 'EADDRINUSE') return reject(new StartError(`Port ${port} is in use by another program. Stop that program, or choose another port: PORT=${port + 1} npm start`))
      if (error.code === 'EACCES') return reject(new StartError(`This user may not use port ${port}. Choose one above 1023: PORT=3000 npm start`))
      reject(error)
    })
    probe.listen(port, host, () => probe.close(() => resolve()))
  })
}

/** One start script a data directory; a lock whose process is gone is taken over. */
function lockDataDir(dataDir: string): () => void {
  const path = join(dataDir, 'run', 'start.pid')
  if (existsSync(path)) {
    const pid = Number(readFileSync(path, 'utf8'))
    if (pid && pid !== process.pid && isStartScript(pid)) throw new StartError(`Lampsum already runs on ${dataDir} (process ${pid}). Stop it first, or set LAMPSUM_DATA_DIR and PORT for a second one.`)
  }
  writeFileSync(path, String(process.pid))
  return () => rmSync(path, { force: true })
}

function isStartScript(pid: number): boolean {
  try {
    return /scripts.(start|dev)\.ts/.test(readFileSync(`/proc/${pid}/cmdline`, 'utf8'))
  } catch {
    return false
  }
}

/** What the web server reads; see runtimeConfig in nuxt.config.ts. */
export function webEnvironment(settings: Settings, foundation: Foundation): NodeJS.ProcessEnv {
  return {
    ...process.env,
    PORT: String(settings.port),
    HOST: settings.host,
    NITRO_PORT: String(settings.port),
    NITRO_HOST: settings.host,
    NUXT_DATABASE_URL: foundation.databaseUrl,
    NUXT_DATA_DIR: settings.dataDir,
    NUXT_DEMO: String(settings.demo),
    NUXT_DEMO_PASSWORD: foundation.secrets.demoPassword,
    NUXT_SOLVE_WORKER: solveWorkerEntry,
    NUXT_PUBLIC_URL: settings.publicUrl,
    NUXT_SMTP_URL: process.env.LAMPSUM_SMTP_URL || '',
    NUXT_ADMIN_EMAIL: settings.adminEmail,
    NUXT_ADMIN_PASSWORD: settings.adminPassword,
    NUXT_SESSION_PASSWORD: foundation.secrets.sessionPassword,
    NUXT_SESSION_COOKIE_SECURE: String(settings.publicUrl.startsWith('https:')),
  }
}

export function runnerEnvironment(settings: Settings, foundation: Foundation): NodeJS.ProcessEnv {
  return { ...process.env, LAMPSUM_DATABASE_URL: foundation.databaseUrl, LAMPSUM_DATA_DIR: settings.dataDir }
}

export interface Supervised {
  stop: () => Promise<void>
  pid: () => number | undefined
}

/**
 * Keeps a process running: output goes to a log file, a crash is told in a line and it is started again after a
 * pause. The IPC channel tells the child when this script is gone, so that kill -9 here leaves nothing behind.
 */
export function supervise(name: string, entry: string, env: NodeJS.ProcessEnv, logFile: string): Supervised {
  const log = createWriteStream(logFile, { flags: 'a' })
  let child: ChildProcess
  let stopping = false
  let pause = 500
  let restart: NodeJS.Timeout | undefined
  const start = () => {
    const startedAt = Date.now()
    child = spawn(process.execPath, ['--enable-source-maps', entry], { env, cwd: projectRoot, detached: true, stdio: ['ignore', 'pipe', 'pipe', 'ipc'] })
    child.stdout!.pipe(log, { end: false })
    child.stderr!.pipe(log, { end: false })
    child.once('exit', (code, signal) => {
      if (stopping) return
      pause = Date.now() - startedAt > 60_000 ? 500 : Math.min(pause * 2, 30_000)
      console.error(`The ${name} stopped (${signal ?? `exit code ${code}`}) and is started again. Its log: ${logFile}`)
      restart = setTimeout(start, pause)
    })
  }
  start()
  return {
    pid: () => child.pid,
    async stop() {
      stopping = true
      clearTimeout(restart)
      if (child.exitCode !== null || child.signalCode !== null) return
      const gone = new Promise<void>(resolve => child.once('exit', () => resolve()))
      child.kill('SIGTERM')
      const timer = setTimeout(() => child.kill('SIGKILL'), 28_000)
      await gone
      clearTimeout(timer)
    },
  }
}
