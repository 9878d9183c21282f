import { spawnSync } from 'node:child_process'
import { createHash } from 'node:crypto'
import { existsSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { join } from 'node:path'
import { build } from 'esbuild'
import { projectRoot, StartError } from './settings'

export const outputDir = join(projectRoot, process.env.LAMPSUM_OUTPUT_DIR || '.output')
export const webEntry = join(outputDir, 'server', 'index.mjs')
export const runnerEntry = join(outputDir, 'runner', 'runner.mjs')
/** Solves frame sets again, in a thread of the web server. */
export const solveWorkerEntry = join(outputDir, 'runner', 'solveWorker.mjs')

const sources = ['app.vue', 'error.vue', 'nuxt.config.ts', 'tailwind.config.ts', 'package-lock.json', 'assets', 'components', 'composables', 'jobs', 'layouts', 'middleware', 'pages', 'plugins', 'public', 'server', 'shared', 'stores']

/** A hash over everything that goes into the build, so that a second start takes seconds. */
function sourcesKey(): string {
  const hash = createHash('sha256')
  const visit = (path: string, name: string) => {
    if (!existsSync(path)) return
    let entries
    try {
      entries = readdirSync(path, { withFileTypes: true })
    } catch {
      hash.update(name).update('\0').update(readFileSync(path)).update('\0')
      return
    }
    for (const entry of entries.sort((a, b) => a.name < b.name ? -1 : 1)) visit(join(path, entry.name), `${name}/${entry.name}`)
  }
  for (const source of sources) visit(join(projectRoot, source), source)
  return hash.digest('hex')
}

export async function buildIfStale(): Promise<boolean> {
  const stamp = join(outputDir, 'lampsum-build')
  const key = sourcesKey()
  if (existsSync(stamp) && readFileSync(stamp, 'utf8') === key && existsSync(webEntry) && existsSync(runnerEntry)) return false
  rmSync(stamp, { force: true })
  console.log('Building (once after each change of the sources)')
  const result = spawnSync(process.execPath, [join(projectRoot, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'build'], { cwd: projectRoot, encoding: 'utf8', env: { ...process.env, NODE_ENV: 'production', NUXT_TELEMETRY_DISABLED: '1' }, maxBuffer: 64 << 20 })
  if (result.status !== 0) throw new StartError(`The build failed:\n${`${result.stdout}\n${result.stderr}`.trim().split('\n').slice(-25).join('\n')}`)
  await bundleRunner(join(outputDir, 'runner'))
  writeFileSync(stamp, key)
  return true
}

/** The runner and its worker threads, each one file; sharp stays outside because it carries a native part. */
export async function bundleRunner(folder: string): Promise<void> {
  await build({
    entryPoints: { runner: join(projectRoot, 'jobs', 'runner.ts'), stageWorker: join(projectRoot, 'jobs', 'stageWorker.ts'), solveWorker: join(projectRoot, 'jobs', 'stages', 'solveWorker.ts') },
    outdir: folder,
    outExtension: { '.js': '.mjs' },
    bundle: true,
    platform: 'node',
    format: 'esm',
    target: 'node20',
    sourcemap: true,
    external: ['sharp'],
    logLevel: 'warning',
    banner: { js: 'import { createRequire as __createRequire } from \'node:module\'; import { fileURLToPath as __fileURLToPath } from \'node:url\'; import { dirname as __pathDirname } from \'node:path\'; const require = __createRequire(import.meta.url); const __filename = __fileURLToPath(import.meta.url); const __dirname = __pathDirname(__filename);' },
  })
}
