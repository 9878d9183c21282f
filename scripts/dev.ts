import { spawn } from 'node:child_process'
import { join } from 'node:path'
import { bundleRunner } from './lib/build'
import { run } from './lib/run'
import { runnerEnvironment, startFoundation, supervise, webEnvironment } from './lib/services'
import { projectRoot, readSettings } from './lib/settings'

/** For developers: the same foundation under Nuxt's development server, with reload on change (not of the runner). */
run(async () => {
  const settings = readSettings()
  const foundation = await startFoundation(settings)
  try {
    await bundleRunner(join(projectRoot, '.output-dev', String(settings.port)))
  } catch (error) {
    await foundation.mariaDb.stop()
    foundation.release()
    throw error
  }
  const runner = supervise('runner', join(projectRoot, '.output-dev', String(settings.port), 'runner.mjs'), runnerEnvironment(settings, foundation), join(settings.dataDir, 'logs', 'runner.log'))
  console.log(`Demo password: ${foundation.secrets.demoPassword} (technician@, analyst@, operator@, admin@, guest@demo.lampsum.example)`)
  const web = spawn(process.execPath, [join(projectRoot, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'dev', '--port', String(settings.port), '--host', settings.host], {
    cwd: projectRoot, stdio: 'inherit', env: { ...webEnvironment(settings, foundation), NUXT_SOLVE_WORKER: join(projectRoot, '.output-dev', String(settings.port), 'solveWorker.mjs'), NODE_ENV: 'development', NUXT_TELEMETRY_DISABLED: '1' },
  })
  let stopped = false
  const stop = async () => {
    if (stopped) return
    stopped = true
    web.kill('SIGTERM')
    await runner.stop()
    await foundation.mariaDb.stop()
    foundation.release()
    process.exit(0)
  }
  for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP'] as const) process.on(signal, () => void stop())
  web.once('exit', () => void stop())
})
