/**
 * The runner: claims jobs and runs them, a few at a time. It can die at any moment; another takes its jobs over when
 * their lease runs out. Several runners may share a database and a data directory.
 */
import { randomUUID } from 'node:crypto'
import { mkdir, readdir, rm } from 'node:fs/promises'
import { availableParallelism, hostname } from 'node:os'
import { dirname, join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { eq, gt } from 'drizzle-orm'
import PQueue from 'p-queue'
import { version } from '../package.json'
import { openDatabase, type Database } from '../server/db/client'
import { publishEvents } from '../server/db/events'
import { runners } from '../server/db/schema'
import { createLocalFileStore, storeFolders } from '../server/store/fileStore'
import { Attempt } from './attempt'
import { createQueue, resumeDiskHolds } from './queue/mariadbQueue'
import { leaseSeconds } from './queue/queue'
import { prepareWorker } from './stageProcess'

const databaseUrl = process.env.LAMPSUM_DATABASE_URL
const dataDir = process.env.LAMPSUM_DATA_DIR
if (!databaseUrl || !dataDir) {
  console.error('The runner needs LAMPSUM_DATABASE_URL and LAMPSUM_DATA_DIR. Start it with “npm start”, which sets both.')
  process.exit(1)
}

const id = randomUUID()
const name = process.env.LAMPSUM_RUNNER_NAME || hostname()
const slots = Math.max(1, Number(process.env.LAMPSUM_RUNNER_SLOTS) || Math.min(4, availableParallelism()))
const enoughFreeBytes = 2 * 2 ** 30
const folders = storeFolders(dataDir)
const { database, close } = openDatabase(databaseUrl, slots + 4)
const queue = createQueue(database)
const store = createLocalFileStore(folders.store)
const running = new Map<string, Attempt>()
const pool = new PQueue({ concurrency: slots })
let stopping = false

const log = (message: string, error?: unknown) => console.log(`${new Date().toISOString()} ${message}`, error ?? '')
const pause = (milliseconds: number) => new Promise(resolve => setTimeout(resolve, milliseconds))
/** A job that has just ended has often queued the next stage, so the claim loop does not sleep on. */
let wake = () => {}
const pauseUntilWoken = (milliseconds: number) => new Promise<void>((resolve) => {
  const timer = setTimeout(resolve, milliseconds)
  wake = () => {
    clearTimeout(timer)
    resolve()
  }
})

/** Goes on through errors: a database that is away for a while must not end the runner. */
function every(milliseconds: number, what: string, work: () => Promise<unknown>): NodeJS.Timeout {
  let busy = false
  return setInterval(async () => {
    if (busy) return
    busy = true
    await work().catch(error => log(`${what} failed and is tried again`, error))
    busy = false
  }, milliseconds)
}

async function register(): Promise<void> {
  const now = new Date()
  const row = { name, host: hostname(), pid: process.pid, cores: availableParallelism(), slots, version, startedAt: now, beatAt: now, stoppedAt: null }
  await database.insert(runners).values({ id, ...row })
  await announce(database)
}

async function announce(target: Database): Promise<void> {
  await target.transaction(transaction => publishEvents(transaction, [{ type: 'runner', campaignId: null, payload: { id } }]))
}

/** Work folders of runners that are gone belong to nobody. */
async function sweepWork(): Promise<void> {
  await mkdir(folders.work, { recursive: true })
  const alive = await database.select({ id: runners.id }).from(runners).where(gt(runners.beatAt, new Date(Date.now() - 3 * leaseSeconds * 1000)))
  const keep = new Set(alive.map(runner => runner.id))
  // A runner that shares this host and is gone left its folder even though its last beat is fresh.
  for (const entry of await readdir(folders.work)) {
    if (entry !== id && !keep.has(entry)) await rm(join(folders.work, entry), { recursive: true, force: true })
  }
}

async function claimLoop(context: ConstructorParameters<typeof Attempt>[0]): Promise<void> {
  while (!stopping) {
    await pool.onSizeLessThan(1)
    if (pool.pending >= slots) {
      await pause(50)
      continue
    }
    const claim = await queue.claim(id).catch((error) => {
      log('Claiming failed and is tried again', error)
      return null
    })
    if (!claim) {
      await pauseUntilWoken(150)
      continue
    }
    const attempt = new Attempt(context, claim)
    running.set(claim.jobId, attempt)
    if (stopping) attempt.end('stop')
    log(`${claim.stage} ${claim.jobId} attempt ${claim.attempt}`)
    void pool.add(() => attempt.execute())
      .catch(error => log(`${claim.stage} ${claim.jobId} could not be settled; its lease will run out`, error))
      .finally(() => {
        running.delete(claim.jobId)
        wake()
      })
  }
}

async function stop(reason: string): Promise<void> {
  if (stopping) return
  stopping = true
  log(`Stopping (${reason})`)
  for (const attempt of running.values()) attempt.end('stop')
  await Promise.race([pool.onIdle(), pause(20_000)])
  timers.forEach(clearInterval)
  await database.update(runners).set({ stoppedAt: new Date() }).where(eq(runners.id, id)).catch(() => {})
  await announce(database).catch(() => {})
  await rm(join(folders.work, id), { recursive: true, force: true })
  await close().catch(() => {})
  process.exit(0)
}

await mkdir(join(folders.work, id), { recursive: true })
await register()
await sweepWork()
await queue.reclaim()
const timers = [
  every(3000, 'The beat', () => database.update(runners).set({ beatAt: new Date() }).where(eq(runners.id, id))),
  every(5000, 'Taking jobs back', () => queue.reclaim()),
  every(30_000, 'The disk check', async () => {
    if (await store.freeBytes() > enoughFreeBytes) await resumeDiskHolds(database)
    await sweepWork()
  }),
]
process.on('SIGTERM', () => void stop('SIGTERM'))
process.on('SIGINT', () => void stop('SIGINT'))
// The start script is gone: nothing supervises this process any more.
process.on('disconnect', () => void stop('the start script is gone'))
const workerEntry = join(dirname(fileURLToPath(import.meta.url)), 'stageWorker.mjs')
prepareWorker(workerEntry)
log(`Runner ${name} is ready with ${slots} slots`)
await claimLoop({ database, queue, store, incoming: folders.incoming, work: join(folders.work, id), workerEntry })
