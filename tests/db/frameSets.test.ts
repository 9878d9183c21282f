import { createHash, randomUUID } from 'node:crypto'
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs'
import { createServer, request, type IncomingHttpHeaders, type Server } from 'node:http'
import type { AddressInfo } from 'node:net'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { createApp, createError, eventHandler, toNodeListener } from 'h3'
import { eq } from 'drizzle-orm'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { writeNpz } from '../../jobs/formats/npz'
import { auditEntries, campaignGuests, events, frameSetFiles, frameSets } from '../../server/db/schema'
import { createLocalFileStore, type FileStore } from '../../server/store/fileStore'
import { sendDownload } from '../../server/utils/fileDownload'
import { frameSetDownload } from '../../server/utils/frameSetFiles'
import { frameSetImage } from '../../server/utils/frameSetImages'
import { getFrameSet, listFrameSets, releaseFrameSet } from '../../server/utils/frameSets'
import { LampsumError } from '../../shared/errors'
import type { Group } from '../../shared/measurement'
import type { User } from '../../shared/schemas/people'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertUser } from '../support/fixtures'

let handle: Awaited<ReturnType<typeof openTestDatabase>>
let root: string
let store: FileStore
let server: Server
let analyst: User
let guest: User
let campaign: string
let acquisition: string
const person = async (role: User['role']): Promise<User> => ({ id: await insertUser(handle.database, role), email: `${role}@lab.example`, name: role, role })

const rows = 3
const columns = 5
const group = (id: string, role: Group['role'], repetition: number): Group => ({ id, line: 1, frequencyHz: 120, repetition, role, lampPhaseDeg: null, depth: null, firstFrame: 0, frameCount: 10, accepted: true, flags: [] })
const groups = [group('d0', 'dark', 0), group('r1', 'reference', 1), group('p1', 'phase', 1)]
const sums = Uint32Array.from({ length: groups.length * rows * columns }, (_, i) => i * 1000)
const image = (factor: number) => ({ dtype: 'float32' as const, shape: [rows, columns], data: Float32Array.from({ length: rows * columns }, (_, i) => i * factor) })

async function insertSet(changes: Partial<typeof frameSets.$inferInsert> = {}): Promise<string> {
  const id = randomUUID()
  await handle.database.insert(frameSets).values({ id, acquisitionId: acquisition, line: 1, frequencyHz: 120, state: 'draft', cutListVersion: 1, checks: [], groups, width: columns, height: rows, createdAt: new Date(), ...changes })
  return id
}

async function insertFile(frameSetId: string, name: string, bytes: Uint8Array) {
  const local = join(root, randomUUID())
  writeFileSync(local, bytes)
  const fileKey = `frame-sets/${frameSetId}/${name}`
  await store.put(fileKey, local)
  const sha256 = createHash('sha256').update(bytes).digest('hex')
  await handle.database.insert(frameSetFiles).values({ frameSetId, name, bytes: bytes.length, sha256, contentType: 'application/octet-stream', fileKey })
  return sha256
}

interface Answer { status: number, headers: IncomingHttpHeaders, body: Buffer }
const get = (path: string, headers: Record<string, string> = {}, method = 'GET') => new Promise<Answer>((resolve, reject) => {
  request({ port: (server.address() as AddressInfo).port, host: '127.0.0.1', path, method, headers }, (response) => {
    const chunks: Buffer[] = []
    response.on('data', chunk => chunks.push(chunk as Buffer))
    response.on('end', () => resolve({ status: response.statusCode!, headers: response.headers, body: Buffer.concat(chunks) }))
  }).on('error', reject).end()
})

let setId: string
let hash: string
const content = Buffer.from(Array.from({ length: 300_000 }, (_, i) => i % 251))

beforeAll(async () => {
  handle = await openTestDatabase()
  root = mkdtempSync(join(tmpdir(), 'lampsum-store-'))
  store = createLocalFileStore(root)
  analyst = await person('analyst')
  guest = await person('guest')
  campaign = await insertCampaign(handle.database, analyst.id)
  acquisition = await insertAcquisition(handle.database, campaign, analyst.id, { number: 14 })
  setId = await insertSet()
  hash = await insertFile(setId, 'manifest.json', content)
  await insertFile(setId, 'frameset.npz', writeNpz({ sums: { dtype: 'uint32', shape: [groups.length, rows, columns], data: sums }, scene: image(1), p: image(2), q: image(3), noise: image(4) }))
  const app = createApp()
  app.use(eventHandler(async (event) => {
    const [, kind, id, name] = event.path.split('/')
    try {
      await sendDownload(event, await (kind === 'files' ? frameSetDownload : frameSetImage)(handle.database, store, id!, name!))
    } catch (error) {
      throw createError({ statusCode: error instanceof LampsumError ? error.status : 500, cause: error })
    }
  }))
  server = createServer(toNodeListener(app))
  await new Promise<void>(resolve => server.listen(0, '127.0.0.1', resolve))
})
afterAll(async () => {
  server?.close()
  await handle?.close()
  rmSync(root, { recursive: true, force: true })
})

describe('downloading a file', () => {
  const path = () => `/files/${setId}/manifest.json`

  it('carries size, a strong ETag, the SHA-256 of the whole and a name to save it under', async () => {
    const { status, headers, body } = await get(path())
    expect(status).toBe(200)
    expect(body.equals(content)).toBe(true)
    expect(headers).toMatchObject({
      'etag': `"${hash}"`, 'accept-ranges': 'bytes', 'content-length': '300000', 'cache-control': 'private, max-age=31536000, immutable',
      'repr-digest': `sha-256=:${createHash('sha256').update(content).digest('base64')}:`, 'content-disposition': 'attachment; filename="acquisition-14-line-1-manifest.json"',
    })
  })

  it('goes on where a broken download stopped, and starts afresh when the file is another', async () => {
    const rest = await get(path(), { 'range': 'bytes=123456-', 'if-range': `"${hash}"` })
    expect([rest.status, rest.headers['content-range']]).toEqual([206, 'bytes 123456-299999/300000'])
    expect(Buffer.concat([content.subarray(0, 123_456), rest.body]).equals(content)).toBe(true)
    const other = await get(path(), { 'range': 'bytes=123456-', 'if-range': '"of another file"' })
    expect([other.status, other.body.length]).toEqual([200, 300_000])
  })

  it('answers several ranges with the whole, and a range beyond the end with 416', async () => {
    expect((await get(path(), { range: 'bytes=0-1,5-6' })).status).toBe(200)
    const beyond = await get(path(), { range: 'bytes=300000-' })
    expect([beyond.status, beyond.headers['content-range'], beyond.headers.etag, beyond.headers['cache-control']]).toEqual([416, 'bytes */300000', undefined, 'private, no-store'])
  })

  it('sends nothing to who has it already, nor for HEAD', async () => {
    const known = await get(path(), { 'if-none-match': `"${hash}"` })
    expect([known.status, known.body.length, known.headers.etag]).toEqual([304, 0, `"${hash}"`])
    const head = await get(path(), { range: 'bytes=0-1' }, 'HEAD')
    expect([head.status, head.headers['content-length'], head.body.length]).toEqual([200, '300000', 0])
  })

  it('answers 404 for a file that the set does not have, whatever the name', async () => {
    for (const name of ['nothing.txt', '..%2f..%2fmanifest.json']) expect((await get(`/files/${setId}/${name}`)).status).toBe(404)
  })
})

describe('an image of a frame set', () => {
  it('is the group’s own slice of the sums', async () => {
    for (const [index, { id }] of groups.entries()) {
      const { headers, body } = await get(`/images/${setId}/${id}`)
      expect([headers['x-lampsum-shape'], headers['x-lampsum-type'], headers['content-length']]).toEqual(['3,5', 'uint32', '60'])
      expect([...new Uint32Array(body.buffer.slice(body.byteOffset, body.byteOffset + 60))]).toEqual([...sums.subarray(index * 15, index * 15 + 15)])
    }
  })

  it('is a solved image by its name', async () => {
    const { headers, body } = await get(`/images/${setId}/q`)
    expect([headers['x-lampsum-shape'], headers['x-lampsum-type']]).toEqual(['3,5', 'float32'])
    expect([...new Float32Array(body.buffer.slice(body.byteOffset, body.byteOffset + 60))]).toEqual([...image(3).data])
    expect((await get(`/images/${setId}/r2`)).status).toBe(404)
  })
})

describe('who sees which sets', () => {
  const idsFor = async (user: User) => (await listFrameSets(handle.database, user, { limit: 200, acquisitionId: acquisition })).items.map(set => set.id)

  it('guests see released sets of their campaigns; drafts that were replaced are seen by nobody in a list', async () => {
    const [draft, released, replaced] = [await insertSet(), await insertSet({ state: 'released', releasedAt: new Date() }), await insertSet({ supersededAt: new Date() })]
    expect(await idsFor(guest)).toEqual([])
    await handle.database.insert(campaignGuests).values({ campaignId: campaign, userId: guest.id, grantedBy: analyst.id, createdAt: new Date() })
    expect(await idsFor(guest)).toEqual([released])
    const seen = await idsFor(analyst)
    expect(seen).toEqual(expect.arrayContaining([draft, released]))
    expect(seen).not.toContain(replaced)
    expect((await getFrameSet(handle.database, replaced)).superseded).toBe(true)
  })

  it('pages neither skip nor double, even among sets made in the same millisecond and while new ones come', async () => {
    const other = await insertAcquisition(handle.database, campaign, analyst.id)
    const createdAt = new Date()
    const made: string[] = []
    for (let i = 0; i < 23; i++) made.push(await insertSet({ acquisitionId: other, line: i, createdAt: i < 15 ? createdAt : new Date(createdAt.getTime() - i) }))
    const seen: string[] = []
    for (let cursor: string | undefined; ;) {
      const page = await listFrameSets(handle.database, analyst, { limit: 5, cursor, acquisitionId: other })
      seen.push(...page.items.map(set => set.id))
      await insertSet({ acquisitionId: other, createdAt: new Date(createdAt.getTime() + 1000) })
      if (!page.nextCursor) break
      cursor = page.nextCursor
    }
    expect(seen).toHaveLength(23)
    expect(new Set(seen)).toEqual(new Set(made))
  })
})

describe('release', () => {
  it('signs a draft once, with its note, in the audit and the live events', async () => {
    const id = await insertSet()
    await releaseFrameSet(handle.database, analyst, id, 'Compared both repetitions.')
    expect(await getFrameSet(handle.database, id)).toMatchObject({ state: 'released', releasedByName: 'The analyst', releaseNote: 'Compared both repetitions.' })
    await expect(releaseFrameSet(handle.database, analyst, id, 'Again.')).rejects.toMatchObject({ code: 'wrong-state' })
    expect(await handle.database.select().from(auditEntries).where(eq(auditEntries.subject, id))).toHaveLength(1)
    expect((await handle.database.select().from(events).where(eq(events.type, 'acquisition'))).at(-1)!.payload).toEqual({ id: acquisition, campaignId: campaign })
  })

  it('refuses a set that a newer run has replaced', async () => {
    await expect(releaseFrameSet(handle.database, analyst, await insertSet({ supersededAt: new Date() }), 'Fine.')).rejects.toMatchObject({ code: 'wrong-state', message: expect.stringMatching(/newer/) })
  })
})
