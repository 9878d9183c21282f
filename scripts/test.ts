import { spawn } from 'node:child_process'
import { mkdtempSync, readFileSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { buildIfStale } from './lib/build'
import { run } from './lib/run'
import { projectRoot } from './lib/settings'

interface Count {
  passed: number
  failed: number
}

const bin = (name: string) => join(projectRoot, 'node_modules', '.bin', name)

/** All checks in order; every one runs even when an earlier one failed. Ends in a plain line "N passed, N failed". */
run(async () => {
  const reports = mkdtempSync(join(tmpdir(), 'lampsum-test-'))
  const total: Count = { passed: 0, failed: 0 }
  const add = (what: string, count: Count) => {
    total.passed += count.passed
    total.failed += count.failed
    console.log(`${what}: ${count.passed} passed, ${count.failed} failed\n`)
  }
  try {
    // The first of all: lint and types read what it generates.
    add('prepare', await step('nuxt prepare', [bin('nuxt'), 'prepare']))
    add('lint', await step('eslint', [bin('eslint'), '.', '--quiet']))
    add('types of the application', await step('nuxt typecheck', [bin('nuxt'), 'typecheck']))
    add('types of jobs, scripts and tests', await step('tsc', [bin('tsc'), '-p', 'jobs/tsconfig.json', '--noEmit']))
    for (const project of ['unit', 'reference', 'db']) add(`${project} tests`, await vitest(project, reports))
    add('build', await build())
    add('browser and server tests', await vitest('e2e', reports))
  } finally {
    rmSync(reports, { recursive: true, force: true })
  }
  console.log(`${total.passed} passed, ${total.failed} failed`)
  if (total.failed) process.exitCode = 1
})

async function step(name: string, [program, ...args]: string[]): Promise<Count> {
  console.log(`── ${name}`)
  return await finished(program!, args) === 0 ? { passed: 1, failed: 0 } : { passed: 0, failed: 1 }
}

async function build(): Promise<Count> {
  console.log('── build')
  try {
    await buildIfStale()
    return { passed: 1, failed: 0 }
  } catch (error) {
    console.error((error as Error).message)
    return { passed: 0, failed: 1 }
  }
}

async function vitest(project: string, reports: string): Promise<Count> {
  console.log(`── ${project} tests`)
  const report = join(reports, `${project}.json`)
  const code = await finished(bin('vitest'), ['run', '--project', project, '--reporter=default', '--reporter=json', `--outputFile.json=${report}`])
  try {
    const { numPassedTests, numFailedTests, numFailedTestSuites } = JSON.parse(readFileSync(report, 'utf8')) as { numPassedTests: number, numFailedTests: number, numFailedTestSuites: number }
    // A file that does not even load has failed without a test of its own.
    const failed = numFailedTests || (code === 0 ? 0 : Math.max(1, numFailedTestSuites))
    return { passed: numPassedTests, failed: numPassedTests + failed ? failed : 1 }
  } catch {
    return { passed: 0, failed: 1 }
  }
}

function finished(program: string, args: string[]): Promise<number> {
  return new Promise((resolve) => {
    const child = spawn(program, args, { cwd: projectRoot, stdio: ['ignore', 'inherit', 'inherit'], env: { ...process.env, NUXT_TELEMETRY_DISABLED: '1', NO_COLOR: '1' } })
    child.on('exit', code => resolve(code ?? 1))
    child.on('error', () => resolve(1))
  })
}
