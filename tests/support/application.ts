import { spawn, type ChildProcess } from 'node:child_process'
import { mkdirSync, mkdtempSync, readFileSync, readdirSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { freePort } from '../../scripts/lib/mariadb'
import { projectRoot } from '../../scripts/lib/settings'
import type { Role } from '../../shared/permissions'

export interface Client {
  cookie: string
  fetch: (path: string, init?: RequestInit) => Promise<Response>
  /** JSON in, JSON out; fails on any status that is not 2xx. */
  call: <T>(method: string, path: string, body?: unknown) => Promise<T>
}

export interface Application {
  url: string
  dataDir: string
  password: string
  signIn: (role: Role) => Promise<Client>
  /** Process id of the running runner. */
  runnerPid: () => number
  stop: () => Promise<number | null>
  log: () => string
}

/** Starts the built application as `npm start` does, on its own port and data directory, with demo accounts but no demo data. */
export async function startApplication(env: NodeJS.ProcessEnv = {}): Promise<Application> {
  const dataDir = mkdtempSync(join(tmpdir(), 'lampsum-e2e-'))
  mkdirSync(join(dataDir, 'run'))
  writeFileSync(join(dataDir, 'run', 'demo-made'), 'not wanted in tests')
  const port = await freePort()
  const url = `http://127.0.0.1:${port}`
  let output = ''
  const child: ChildProcess = spawn(process.execPath, ['--import', 'tsx', join(projectRoot, 'scripts', 'start.ts')], {
    cwd: projectRoot, env: { ...process.env, NODE_ENV: 'production', PORT: String(port), LAMPSUM_DATA_DIR: dataDir, ...env }, stdio: ['ignore', 'pipe', 'pipe'],
  })
  const exited = new Promise<number | null>(resolve => child.once('exit', code => resolve(code)))
  child.stdout!.on('data', chunk => output += chunk)
  child.stderr!.on('data', chunk => output += chunk)
  const password = await new Promise<string>((resolve, reject) => {
    const timer = setInterval(() => {
      const found = /technician@demo\.lampsum\.example\s+(\S+)/.exec(output)
      if (!found) return
      clearInterval(timer)
      resolve(found[1]!)
    }, 50)
    void exited.then((code) => {
      clearInterval(timer)
      reject(new Error(`The application ended with ${code}: ${output}`))
    })
  })
  return {
    url, dataDir, password, log: () => output,
    signIn: role => signIn(url, `${role}@demo.lampsum.example`, password),
    runnerPid: () => childrenOf(child.pid!).find(pid => readFileSync(`/proc/${pid}/cmdline`, 'utf8').includes('runner.mjs'))!,
    async stop() {
      child.kill('SIGTERM')
      const code = await exited
      rmSync(dataDir, { recursive: true, force: true })
      return code
    },
  }
}

export function childrenOf(pid: number): number[] {
  return readdirSync('/proc').filter(entry => /^\d+$/.test(entry)).map(Number).filter((entry) => {
    try {
      return Number(/\) \S (\d+)/.exec(readFileSync(`/proc/${entry}/stat`, 'utf8'))?.[1]) === pid
    } catch {
      return false
    }
  })
}

async function signIn(url: string, email: string, password: string): Promise<Client> {
  const answer = await fetch(`${url}/api/auth/sign-in`, { method: 'POST', headers: { 'content-type': 'application/json' }, body: JSON.stringify({ email, password }) })
  if (!answer.ok) throw new Error(`${email} could not sign in: ${await answer.text()}`)
  const cookie = answer.headers.getSetCookie().map(each => each.split(';')[0]).join('; ')
  const request = (path: string, init: RequestInit = {}) => fetch(`${url}${path}`, { ...init, headers: { cookie, ...init.headers } })
  return {
    cookie,
    fetch: request,
    async call<T>(method: string, path: string, body?: unknown) {
      const response = await request(path, { method, ...(body === undefined ? {} : { body: JSON.stringify(body), headers: { 'content-type': 'application/json' } }) })
      if (!response.ok) throw new Error(`${method} ${path}: ${response.status} ${await response.text()}`)
      return await response.json() as T
    },
  }
}

export interface LiveEvent {
  id: string
  type: string
  data: Record<string, unknown>
}

/** Reads /api/events until an event satisfies `wanted`; answers all that came before it, and it. */
export async function eventsUntil(client: Client, wanted: (event: LiveEvent) => boolean, options: { signal?: AbortSignal, onOpen?: () => unknown, lastEventId?: string } = {}): Promise<LiveEvent[]> {
  const controller = new AbortController()
  const signal = AbortSignal.any([controller.signal, options.signal ?? AbortSignal.timeout(120_000)])
  const response = await client.fetch('/api/events', { signal, headers: options.lastEventId ? { 'last-event-id': options.lastEventId } : {} })
  if (!response.ok) throw new Error(`/api/events answered ${response.status}`)
  await options.onOpen?.()
  const seen: LiveEvent[] = []
  let rest = ''
  for await (const chunk of response.body!.pipeThrough(new TextDecoderStream())) {
    const blocks = (rest + chunk).split('\n\n')
    rest = blocks.pop()!
    for (const block of blocks) {
      const field = (name: string) => block.split('\n').find(line => line.startsWith(`${name}:`))?.slice(name.length + 1).trim()
      const data = field('data')
      if (!data) continue
      const event = { id: field('id') ?? '', type: field('event') ?? 'message', data: JSON.parse(data) as Record<string, unknown> }
      seen.push(event)
      if (wanted(event)) {
        controller.abort()
        return seen
      }
    }
  }
  throw new Error('The stream of events ended')
}
