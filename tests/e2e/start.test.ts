import { spawnSync } from 'node:child_process'
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { createServer, type AddressInfo } from 'node:net'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { describe, expect, it } from 'vitest'
import { projectRoot } from '../../scripts/lib/settings'
import { childrenOf, startApplication } from '../support/application'

const start = (env: NodeJS.ProcessEnv) => spawnSync(process.execPath, ['--import', 'tsx', join(projectRoot, 'scripts', 'start.ts')], { cwd: projectRoot, env: { ...process.env, ...env }, encoding: 'utf8', timeout: 60_000 })
const alive = (pid: number) => {
  try {
    return !/\) Z /.test(readFileSync(`/proc/${pid}/stat`, 'utf8'))
  } catch {
    return false
  }
}

describe('the start command', () => {
  it('runs two instances beside each other, and leaves no process behind', async () => {
    const [one, two] = [await startApplication(), await startApplication()]
    expect(one.url).not.toBe(two.url)
    for (const each of [one, two]) expect(await (await fetch(`${each.url}/api/health`)).json()).toMatchObject({ status: 'ok', database: 'ok', runners: 1 })
    const processes = [one.runnerPid(), two.runnerPid()].flatMap((pid) => {
      const parent = Number(/\) \S (\d+)/.exec(readFileSync(`/proc/${pid}/stat`, 'utf8'))![1])
      return childrenOf(parent)
    })
    expect(processes.length).toBeGreaterThanOrEqual(6)
    expect(await Promise.all([one.stop(), two.stop()])).toEqual([0, 0])
    expect(processes.filter(alive)).toEqual([])
  })

  it('says in a sentence that the port is in use', async () => {
    const server = createServer().listen(0, '127.0.0.1')
    await new Promise(resolve => server.once('listening', resolve))
    const { port } = server.address() as AddressInfo
    const folder = mkdtempSync(join(tmpdir(), 'lampsum-port-'))
    const { status, stderr } = start({ PORT: String(port), LAMPSUM_DATA_DIR: folder })
    server.close()
    rmSync(folder, { recursive: true })
    expect(status).toBe(1)
    expect(stderr.trim()).toMatch(new RegExp(`^Port ${port} is in use.*npm start$`))
  })

  it('says in a sentence that the data directory is no folder, or that its secrets cannot be read', () => {
    const folder = mkdtempSync(join(tmpdir(), 'lampsum-broken-'))
    const file = join(folder, 'file')
    writeFileSync(file, '')
    expect(start({ PORT: '39117', LAMPSUM_DATA_DIR: file }).stderr.trim()).toMatch(/is not a folder\. Set LAMPSUM_DATA_DIR/)
    writeFileSync(join(folder, 'secrets.json'), '{ broken')
    expect(start({ PORT: '39117', LAMPSUM_DATA_DIR: folder }).stderr.trim()).toMatch(/secrets\.json cannot be read\. Restore it/)
    rmSync(folder, { recursive: true })
  })
})
