import { existsSync } from 'node:fs'
import { join } from 'node:path'
import { buildIfStale, runnerEntry, webEntry } from './lib/build'
import { startDemo } from './lib/demoProcess'
import { run } from './lib/run'
import { runnerEnvironment, startFoundation, supervise, webEnvironment, type Foundation, type Supervised } from './lib/services'
import { readSettings, StartError, type Settings } from './lib/settings'

const roles = ['technician', 'analyst', 'operator', 'admin', 'guest']

run(async () => {
  const settings = readSettings()
  await buildIfStale()
  const foundation = await startFoundation(settings)
  const logs = join(settings.dataDir, 'logs')
  const web = supervise('web server', webEntry, webEnvironment(settings, foundation), join(logs, 'web.log'))
  const runner = supervise('runner', runnerEntry, runnerEnvironment(settings, foundation), join(logs, 'runner.log'))
  const stop = stopOnce(foundation, [web, runner])
  try {
    await waitForHealth(settings, join(logs, 'web.log'))
  } catch (error) {
    await stop()
    throw error
  }
  announce(settings, foundation)
  if (settings.demo) startDemo(settings, foundation, join(logs, 'demo.log'))
})

/** Those who write stop first, the database last. A second signal while stopping changes nothing. */
function stopOnce(foundation: Foundation, processes: Supervised[]): () => Promise<void> {
  let stopped: Promise<void> | undefined
  const stop = () => stopped ??= (async () => {
    await Promise.all(processes.map(each => each.stop()))
    await foundation.mariaDb.stop()
    foundation.release()
  })()
  for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP'] as const) {
    process.on(signal, () => {
      if (!stopped) console.log('\nStopping; running jobs go on at the next start.')
      void stop().then(() => process.exit(0))
    })
  }
  return stop
}

async function waitForHealth({ port, host }: Settings, log: string): Promise<void> {
  const address = host === '0.0.0.0' || host === '::' ? '127.0.0.1' : host
  for (const until = Date.now() + 60_000; Date.now() < until;) {
    try {
      const response = await fetch(`http://${address}:${port}/api/health`, { signal: AbortSignal.timeout(2000) })
      if (((await response.json()) as { status: string }).status === 'ok') return
    } catch {
      // Not up yet.
    }
    await new Promise(resolve => setTimeout(resolve, 100))
  }
  throw new StartError(`Lampsum did not become healthy within a minute.${existsSync(log) ? ` Its log: ${log}` : ''}`)
}

function announce(settings: Settings, { secrets }: Foundation): void {
  console.log(`\nLampsum is ready: ${settings.publicUrl}\n`)
  if (!settings.demo) return
  console.log('Demo accounts (only while LAMPSUM_DEMO is not 0):')
  for (const role of roles) console.log(`  ${`${role}@demo.lampsum.example`.padEnd(36)}${secrets.demoPassword}`)
  console.log('\nStop with Ctrl-C.')
}
