import { createHash } from 'node:crypto'
import { existsSync, mkdtempSync, readFileSync, rmSync, statSync, symlinkSync, utimesSync, writeFileSync } from 'node:fs'
import { request as httpRequest } from 'node:http'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { eq } from 'drizzle-orm'
import { Upload as TusUpload } from 'tus-js-client'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { events, jobs, uploads } from '../../server/db/schema'
import { finishCompleteUploads, removeIdleUploads, sweepIncoming } from '../../server/utils/uploadReconcile'
import { finishUpload } from '../../server/utils/uploadState'
import { listUploads, listUploadsOf, openReservationBytes } from '../../server/utils/uploads'
import type { Database } from '../../server/db/client'
import type { User } from '../../shared/schemas/people'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertUser } from '../support/fixtures'
import { metadataOf, someBytes, startKillableUploadServer, startUploadServer, tus } from '../support/uploads'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
let folder: string
let server: Awaited<ReturnType<typeof startUploadServer>>
let technician: User
let colleague: User
let analyst: User
let user: User
let acquisition: string
let freeBytes = 1e12
let database: () => Database
const person = async (role: User['role']): Promise<User> => ({ id: await insertUser(handle.database, role), email: `${role}@lab.example`, name: role, role })
const day = 24 * 3600_000

beforeAll(async () => {
  handle = await openTestDatabase()
  database = () => handle.database
  folder = mkdtempSync(join(tmpdir(), 'lampsum-incoming-'))
  technician = await person('technician')
  colleague = await person('technician')
  analyst = await person('analyst')
  user = technician
  acquisition = await insertAcquisition(handle.database, await insertCampaign(handle.database, analyst.id), analyst.id)
  server = await startUploadServer({ folder, database: () => database(), user: () => user, freeBytes: async () => freeBytes })
})
afterAll(async () => {
  await server?.stop()
  await handle?.close()
  rmSync(folder, { recursive: true, force: true })
})

const metadata = (changes: Record<string, string> = {}) => metadataOf({ filename: 'take.mp4', filetype: 'video/mp4', acquisitionId: acquisition, kind: 'clip', ...changes })
const create = (bytes: number, changes?: Record<string, string>) => tus('POST', `${server.origin}/api/uploads`, { 'Upload-Length': String(bytes), 'Upload-Metadata': metadata(changes) })
async function begin(bytes: number) {
  const { headers } = await create(bytes)
  const id = headers.location!.split('/').pop()!
  return { id, url: `${server.origin}${headers.location}`, path: join(folder, id) }
}
const patch = (url: string, offset: number, body: Buffer) => tus('PATCH', url, { 'Upload-Offset': String(offset) }, body)
const rowOf = async (id: string) => (await handle.database.select().from(uploads).where(eq(uploads.id, id)))[0]!
const proofsOf = (id: string) => handle.database.select().from(jobs).where(eq(jobs.uploadId, id))
const sha256 = (bytes: Buffer) => createHash('sha256').update(bytes).digest('hex')

describe('creating an upload', () => {
  it.each([
    ['an empty file', 0, {}, 400, /file is empty/],
    ['a kind that is neither clip nor record', 10, { kind: 'movie' }, 400, /clip or record/],
    ['a second part', 10, { part: '2' }, 400, /cannot be joined yet\. Upload one file/],
    ['an acquisition that is not there', 10, { acquisitionId: 'nowhere' }, 404, /Register it first/],
    ['a nameless file', 10, { filename: ' ' }, 400, /filename/],
  ])('refuses %s with a sentence', async (_, bytes, changes, status, sentence) => {
    const answer = await create(bytes, changes)
    expect(answer.status).toBe(status)
    expect(answer.text).toMatch(sentence)
    expect(answer.headers['tus-resumable']).toBe('1.0.0')
  })

  it('refuses a size that is told later', async () => {
    const answer = await tus('POST', `${server.origin}/api/uploads`, { 'Upload-Defer-Length': '1', 'Upload-Metadata': metadata() })
    expect(answer.status).toBe(400)
    expect(answer.text).toMatch(/Upload-Length/)
  })

  it('keeps the client’s file name out of the path', async () => {
    const { headers } = await create(10, { filename: '../../etc/passwd' })
    expect(headers.location).toMatch(/^\/api\/uploads\/[0-9a-f-]{36}$/)
    expect(existsSync(join(folder, headers.location!.split('/').pop()!))).toBe(true)
    expect((await rowOf(headers.location!.split('/').pop()!)).filename).toBe('../../etc/passwd')
  })

  it('promises no space twice: what is still to come of other uploads counts as taken, and 1 GiB stays free', async () => {
    const promised = await openReservationBytes(handle.database)
    freeBytes = 2 ** 30 + promised + 1000
    const answers = await Promise.all([create(600), create(600), create(600)])
    expect(answers.map(answer => answer.status).sort()).toEqual([201, 507, 507])
    expect(answers.find(answer => answer.status === 507)!.text).toMatch(/free for uploads/)
    freeBytes = 1e12
  })

  it('sends no CORS header', async () => {
    const { headers } = await tus('OPTIONS', `${server.origin}/api/uploads`, { Origin: 'https://elsewhere.example' })
    expect(headers['access-control-allow-origin']).toBeUndefined()
    expect(headers['tus-extension']).toBe('creation,creation-with-upload,termination,expiration')
  })
})

describe('receiving bytes', () => {
  it('goes on at the offset, refuses another one, and hands a complete upload to exactly one proof', async () => {
    const bytes = someBytes(3_000_000)
    const { id, url, path } = await begin(bytes.length)
    expect((await patch(url, 0, bytes.subarray(0, 1_234_567))).headers['upload-offset']).toBe('1234567')
    expect((await patch(url, 99, bytes.subarray(99))).status).toBe(409)
    const head = await tus('HEAD', url)
    expect(head.headers['upload-offset']).toBe('1234567')
    expect(head.headers['upload-length']).toBe('3000000')
    expect((await rowOf(id)).state).toBe('receiving')
    expect((await patch(url, 1_234_567, bytes.subarray(1_234_567))).status).toBe(204)
    expect(sha256(readFileSync(path))).toBe(sha256(bytes))
    expect(await rowOf(id)).toMatchObject({ state: 'verifying', receivedBytes: 3_000_000 })
    expect(await Promise.all([finishUpload(handle.database, id), finishUpload(handle.database, id)])).toEqual([false, false])
    expect((await proofsOf(id)).map(job => job.stage)).toEqual(['verify'])
    expect((await tus('HEAD', url)).headers['upload-offset']).toBe('3000000')
  })

  it('refuses more bytes than the file has, without growing the file', async () => {
    const { url, path } = await begin(1000)
    expect((await patch(url, 0, someBytes(1001))).status).toBe(413)
    expect(statSync(path).size).toBe(0)
    const chunked = await tus('PATCH', url, { 'Upload-Offset': '0', 'Transfer-Encoding': 'chunked' }, someBytes(1001))
    expect(chunked.status).toBe(413)
    expect(statSync(path).size).toBe(0)
  })

  it('says 507 when the disk fills up in the middle, and keeps the upload', async () => {
    const { id, url, path } = await begin(1000)
    rmSync(path)
    symlinkSync('/dev/full', path)
    const answer = await patch(url, 0, someBytes(1000))
    expect(answer.status).toBe(507)
    expect(answer.text).toMatch(/free disk space/)
    expect((await rowOf(id)).state).toBe('receiving')
    rmSync(path)
  })

  it('takes the first bytes along with the creation', async () => {
    const bytes = someBytes(5000)
    const answer = await tus('POST', `${server.origin}/api/uploads`, { 'Upload-Length': '5000', 'Upload-Metadata': metadata(), 'Content-Type': 'application/offset+octet-stream' }, bytes)
    expect(answer.status).toBe(201)
    expect(answer.headers['upload-offset']).toBe('5000')
    expect((await rowOf(answer.headers.location!.split('/').pop()!)).state).toBe('verifying')
  })

  it('makes a sender that has fallen silent give way: HEAD answers with what has arrived', async () => {
    const { url } = await begin(1_000_000)
    const silent = httpRequest(url, { method: 'PATCH', headers: { 'Tus-Resumable': '1.0.0', 'Content-Type': 'application/offset+octet-stream', 'Upload-Offset': '0', 'Content-Length': '1000000' } })
    silent.on('error', () => {})
    silent.write(someBytes(400_000))
    await new Promise(resolve => setTimeout(resolve, 300))
    const before = process.cpuUsage()
    const answers = await Promise.all([tus('HEAD', url), tus('HEAD', url)])
    const { user: userCpu, system } = process.cpuUsage(before)
    expect(answers.map(answer => answer.headers['upload-offset'])).toEqual(['400000', '400000'])
    // It waited half a second for the sender; a loop would have burnt all of it.
    expect((userCpu + system) / 1000).toBeLessThan(400)
    silent.destroy()
  })

  it('keeps what had arrived when the connection breaks', async () => {
    const { url } = await begin(1_000_000)
    const broken = httpRequest(url, { method: 'PATCH', headers: { 'Tus-Resumable': '1.0.0', 'Content-Type': 'application/offset+octet-stream', 'Upload-Offset': '0', 'Content-Length': '1000000' } })
    broken.on('error', () => {})
    broken.write(someBytes(300_000))
    await new Promise(resolve => setTimeout(resolve, 200))
    broken.destroy()
    await expect.poll(async () => (await tus('HEAD', url)).headers['upload-offset']).toBe('300000')
  })
})

describe('whose upload it is', () => {
  it('answers 404 for a colleague’s upload, and lets an analyst go on with it', async () => {
    const { url } = await begin(1000)
    user = colleague
    expect([(await tus('HEAD', url)).status, (await patch(url, 0, someBytes(10))).status, (await tus('DELETE', url)).status]).toEqual([404, 404, 404])
    user = analyst
    expect((await tus('HEAD', url)).status).toBe(200)
    user = technician
  })

  it('lists a technician’s own uploads, and everybody’s for an analyst', async () => {
    const { id } = await begin(1000)
    const idsFor = async (who: User) => (await listUploads(handle.database, who, { limit: 200 })).items.map(upload => upload.id)
    expect(await idsFor(technician)).toContain(id)
    expect(await idsFor(colleague)).not.toContain(id)
    expect(await idsFor(analyst)).toContain(id)
  })
})

describe('removing', () => {
  it('removes a partial upload with its bytes; it is gone for good', async () => {
    const { id, url, path } = await begin(1000)
    await patch(url, 0, someBytes(400))
    expect((await tus('DELETE', url)).status).toBe(204)
    expect(existsSync(path)).toBe(false)
    expect((await rowOf(id)).state).toBe('removed')
    expect([(await tus('HEAD', url)).status, (await patch(url, 400, someBytes(600))).status]).toEqual([410, 410])
    expect((await listUploadsOf(handle.database, acquisition)).map(upload => upload.id)).not.toContain(id)
  })

  it('refuses to remove a complete one, even when its hook has not run', async () => {
    const { id, url, path } = await begin(1000)
    writeFileSync(path, someBytes(1000))
    expect((await tus('DELETE', url)).status).toBe(409)
    expect((await rowOf(id)).state).toBe('verifying')
    expect(existsSync(path)).toBe(true)
  })
})

describe('repair', () => {
  it('hands an upload on whose last byte came while the database was away, once, and tells nobody of success before', async () => {
    const bytes = someBytes(2000)
    const { id, url } = await begin(bytes.length)
    await patch(url, 0, bytes.subarray(0, 1000))
    const working = database
    let calls = 0
    // The request is let in and finds its row; then the database goes away.
    database = () => {
      if (++calls > 3) throw Object.assign(new Error('connect ENOENT'), { code: 'ENOENT' })
      return working()
    }
    const last = await patch(url, 1000, bytes.subarray(1000))
    expect(last.status).toBe(503)
    // With 5xx the client would forget this upload and begin another.
    expect((await tus('HEAD', url)).status).toBe(423)
    database = working
    expect((await rowOf(id)).state).toBe('receiving')
    expect(await finishCompleteUploads(handle.database, folder)).toBe(1)
    expect(await finishCompleteUploads(handle.database, folder)).toBe(0)
    expect((await rowOf(id)).state).toBe('verifying')
    expect(await proofsOf(id)).toHaveLength(1)
  })

  it('a HEAD that sees all bytes hands the upload on before it answers', async () => {
    const { id, url, path } = await begin(1000)
    writeFileSync(path, someBytes(1000))
    expect((await tus('HEAD', url)).headers['upload-offset']).toBe('1000')
    expect((await rowOf(id)).state).toBe('verifying')
  })

  it('gives up only partial uploads without a byte for seven days; complete ones never', async () => {
    const [idle, lively, complete, proven] = [await begin(1000), await begin(1000), await begin(1000), await begin(1000)]
    await patch(proven.url, 0, someBytes(1000))
    writeFileSync(complete.path, someBytes(1000))
    const now = new Date()
    const ago = (days: number) => new Date(now.getTime() - days * day)
    for (const { id } of [idle, complete, proven]) await handle.database.update(uploads).set({ createdAt: ago(40), lastActivityAt: ago(30) }).where(eq(uploads.id, id))
    await handle.database.update(uploads).set({ createdAt: ago(40), lastActivityAt: ago(6.9) }).where(eq(uploads.id, lively.id))
    expect(await removeIdleUploads(handle.database, folder, now)).toBe(1)
    expect(await Promise.all([idle, lively, complete, proven].map(async ({ id }) => (await rowOf(id)).state))).toEqual(['removed', 'receiving', 'receiving', 'verifying'])
    expect([idle, lively, complete, proven].map(({ path }) => existsSync(path))).toEqual([false, true, true, true])
  })

  it('sweeps files that belong to no upload, and no others', async () => {
    const { path } = await begin(1000)
    const [orphan, fresh] = [join(folder, 'orphan'), join(folder, 'fresh')]
    writeFileSync(orphan, 'left over')
    writeFileSync(fresh, 'just being made')
    utimesSync(orphan, new Date(Date.now() - 2 * 3600_000), new Date(Date.now() - 2 * 3600_000))
    utimesSync(path, new Date(0), new Date(0))
    await sweepIncoming(handle.database, folder)
    expect([orphan, fresh, path].map(existsSync)).toEqual([false, true, true])
  })
})

describe('live events', () => {
  it('tells of the creation and of the state, with what a list needs', async () => {
    const { id, url } = await begin(100)
    await patch(url, 0, someBytes(100))
    const told = (await handle.database.select().from(events).where(eq(events.type, 'upload'))).filter(event => event.payload.id === id)
    expect(told[0]!.payload).toMatchObject({ state: 'receiving', bytes: 100, filename: 'take.mp4', userId: technician.id, acquisitionId: acquisition })
    expect(told.at(-1)!.payload).toMatchObject({ state: 'verifying', receivedBytes: 100 })
  })
})

describe('an unmodified tus-js-client', () => {
  it('resumes through kill -9 of the server and delivers the same bytes', async () => {
    const bytes = someBytes(64 << 20)
    const killable = await startKillableUploadServer({ url: handle.url, folder, userId: technician.id })
    const source = join(folder, '..', `lampsum-source-${process.pid}`)
    writeFileSync(source, bytes)
    let kills = 0
    let sentAtKill = 0
    let killing = Promise.resolve()
    const { createReadStream } = await import('node:fs')
    const url = await new Promise<string>((resolve, reject) => {
      const upload = new TusUpload(createReadStream(source), {
        endpoint: `${killable.origin}/api/uploads`, uploadSize: bytes.length, chunkSize: 8 << 20, retryDelays: Array.from({ length: 60 }, () => 100),
        metadata: { filename: 'long.mp4', filetype: 'video/mp4', acquisitionId: acquisition, kind: 'clip' },
        onProgress: (sent) => {
          if (kills >= 4 || sent < sentAtKill + 9_000_000) return
          kills++
          sentAtKill = sent
          killing = killing.then(killable.kill).then(killable.start)
        },
        onError: reject,
        onSuccess: () => resolve(upload.url!),
      })
      upload.start()
    })
    await killing
    await killable.kill()
    rmSync(source)
    const id = url.split('/').pop()!
    expect(kills).toBe(4)
    expect(sha256(readFileSync(join(folder, id)))).toBe(sha256(bytes))
    await finishCompleteUploads(handle.database, folder)
    expect(await proofsOf(id)).toHaveLength(1)
    expect((await handle.database.select().from(uploads).where(eq(uploads.filename, 'long.mp4'))).map(row => row.state)).toEqual(['verifying'])
  })
})
