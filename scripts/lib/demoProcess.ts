import { spawn } from 'node:child_process'
import { createWriteStream, existsSync } from 'node:fs'
import { join } from 'node:path'
import type { Foundation } from './services'
import { projectRoot, type Settings } from './settings'

/** Makes the demo once, in the background, through the same HTTP interface that people use. */
export function startDemo(settings: Settings, foundation: Foundation, logFile: string): void {
  if (existsSync(join(settings.dataDir, 'run', 'demo-made'))) return
  const log = createWriteStream(logFile, { flags: 'a' })
  const child = spawn(process.execPath, ['--import', 'tsx', join(projectRoot, 'scripts', 'demo.ts')], {
    cwd: projectRoot,
    env: { ...process.env, LAMPSUM_DEMO_URL: `http://127.0.0.1:${settings.port}`, LAMPSUM_DATA_DIR: settings.dataDir, LAMPSUM_DEMO_PASSWORD: foundation.secrets.demoPassword },
    stdio: ['ignore', 'pipe', 'pipe'],
  })
  child.stdout.pipe(log)
  child.stderr.pipe(log)
  child.once('exit', (code) => {
    if (code !== 0 && code !== null) console.error(`The demo data could not be made. Lampsum works all the same; the reason is in ${logFile}`)
  })
  process.once('exit', () => child.kill())
}
