import { spawn, type ChildProcess } from 'node:child_process'
import { randomBytes } from 'node:crypto'
import { createServer, request as httpRequest, type IncomingHttpHeaders, type IncomingMessage } from 'node:http'
import type { AddressInfo } from 'node:net'
import { join } from 'node:path'
import { createInterface } from 'node:readline'
import type { Database } from '../../server/db/client'
import type { User } from '../../shared/schemas/people'
import { projectRoot } from '../../scripts/lib/settings'
import { TusServer } from '../../server/utils/tusServer'

export interface UploadServerOptions {
  folder: string
  database: () => Database
  user: () => User
  freeBytes?: () => Promise<number>
}

/** The tus server behind a plain HTTP server in this process. */
export async function startUploadServer({ folder, database, user, freeBytes = async () => 1e12 }: UploadServerOptions) {
  const tus = new TusServer({ folder, database, freeBytes, userOf: user })
  const server = createServer((request, response) => void tus.handle(request, response))
  await new Promise<void>(resolve => server.listen(0, '127.0.0.1', resolve))
  return {
    origin: `http://127.0.0.1:${(server.address() as AddressInfo).port}`,
    async stop() {
      server.closeAllConnections()
      await new Promise(resolve => server.close(resolve))
    },
  }
}

/** The same in a process of its own; `kill` is kill -9, `start` brings it back on the same port. */
export async function startKillableUploadServer(environment: { url: string, folder: string, userId: string }) {
  let child: ChildProcess
  let port = '0'
  const start = async () => {
    child = spawn(process.execPath, ['--import', 'tsx', join(projectRoot, 'tests', 'support', 'uploadServer.ts')], {
      cwd: projectRoot, stdio: ['ignore', 'pipe', 'inherit'],
      env: { ...process.env, LAMPSUM_TEST_DATABASE_URL: environment.url, LAMPSUM_TEST_FOLDER: environment.folder, LAMPSUM_TEST_USER: environment.userId, LAMPSUM_TEST_PORT: port },
    })
    for await (const line of createInterface(child.stdout!)) {
      if (line.startsWith('port ')) {
        port = line.slice(5)
        return
      }
    }
    throw new Error('The upload server did not start.')
  }
  const kill = async () => {
    const gone = new Promise(resolve => child.once('exit', resolve))
    child.kill('SIGKILL')
    await gone
  }
  await start()
  return { origin: `http://127.0.0.1:${port}`, start, kill }
}

export interface TusAnswer {
  status: number
  headers: IncomingHttpHeaders
  text: string
}

/** One tus request. */
export function tus(method: string, url: string, headers: Record<string, string> = {}, body?: Buffer): Promise<TusAnswer> {
  return new Promise((resolve, reject) => {
    const sent = httpRequest(url, { method, headers: { 'Tus-Resumable': '1.0.0', ...(method === 'PATCH' && { 'Content-Type': 'application/offset+octet-stream' }), ...headers } }, (response: IncomingMessage) => {
      const chunks: Buffer[] = []
      response.on('data', chunk => chunks.push(chunk as Buffer))
      response.on('end', () => resolve({ status: response.statusCode!, headers: response.headers, text: Buffer.concat(chunks).toString() }))
      response.on('error', reject)
    })
    sent.on('error', reject)
    sent.end(body)
  })
}

export const metadataOf = (values: Record<string, string>) => Object.entries(values).map(([key, value]) => `${key} ${Buffer.from(value).toString('base64')}`).join(',')

export const someBytes = (count: number) => randomBytes(count)
