import { createHash, randomUUID } from 'node:crypto'
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { createServer, request, type IncomingHttpHeaders, type Server } from 'node:http'
import type { AddressInfo } from 'node:net'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { createApp, createError, eventHandler, toNodeListener } from 'h3'
import { eq } from 'drizzle-orm'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { readNpz, writeNpz } from '../../jobs/formats/npz'
import { createSolvePool } from '../../jobs/stages/solvePool'
import { auditEntries, campaignGuests, events, frameSetFiles, frameSets, jobs, stageOutputs } from '../../server/db/schema'
import { createLocalFileStore, type FileStore } from '../../server/store/fileStore'
import { sendDownload } from '../../server/utils/fileDownload'
import { frameSetDownload } from '../../server/utils/frameSetFiles'
import { frameSetImage } from '../../server/utils/frameSetImages'
import { solveFrameSetAgain, type SolveContext } from '../../server/utils/frameSetSolve'
import { getFrameSet, listFrameSets, releaseFrameSet } from '../../server/utils/frameSets'
import { createSolver, type Solver } from '../../server/utils/solver'
import { LampsumError } from '../../shared/errors'
import type { FrameSetReview } from '../../shared/frameSetReview'
import type { Group } from '../../shared/measurement'
import type { User } from '../../shared/schemas/people'
import { openTestDatabase } from '../support/database'
import { insertAcquisition, insertCampaign, insertUser } from '../support/fixtures'
import { solverFolder, storedLine, writeStored, type StoredLine } from '../support/solvedSets'

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
      'etag': `"${hash}"`, 'accept-ranges': 'bytes', 'content-length': '300000', 'cache-control': 'private, no-cache',
      'repr-digest': `sha-256=:${createHash('sha256').update(content).digest('base64')}:`, 'content-disposition': 'attachment; filename="acquisition-14-line-1-manifest.json"',
    })
  })

  it('may be kept by a browser for good only once the set is released, as a draft can be solved again', async () => {
    const released = await insertSet({ state: 'released', releasedAt: new Date(), supersededAt: new Date(), acquisitionId: await insertAcquisition(handle.database, campaign, analyst.id) })
    await insertFile(released, 'manifest.json', content)
    expect((await get(`/files/${released}/manifest.json`)).headers['cache-control']).toBe('private, max-age=31536000, immutable')
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

describe('solving again', () => {
  let folder: Awaited<ReturnType<typeof solverFolder>>
  let solver: Solver
  let line: StoredLine
  let context: SolveContext
  const noReview: FrameSetReview = { identity: 'i', repetitionKeys: { 1: 'a', 2: 'b', 3: 'c' }, usable: Array<boolean>(12).fill(true), rejections: [], acceptedByPerson: [], history: [], flags: [] }
  const filesOf = (id: string) => handle.database.select().from(frameSetFiles).where(eq(frameSetFiles.frameSetId, id))
  const bytesOf = async (id: string, name: string) => readFileSync(store.localPath((await filesOf(id)).find(file => file.name === name)!.fileKey))

  /** A set of three repetitions, as the check stage leaves it. */
  async function makeSet(review: Partial<FrameSetReview> = {}, own = acquisition): Promise<string> {
    const { files, checks } = await writeStored(join(folder.root, randomUUID()), line, createSolvePool({ threads: 1 }))
    const id = randomUUID()
    await handle.database.insert(frameSets).values({ id, acquisitionId: own, line: 1, frequencyHz: 400, state: 'draft', cutListVersion: 1, checks, groups: line.groups, review: { ...noReview, ...review }, width: line.content.width, height: line.content.height, createdAt: new Date() })
    for (const { name, path, bytes, sha256, contentType } of files) {
      const fileKey = `results/${id}/${name}`
      await store.put(fileKey, path)
      await handle.database.insert(frameSetFiles).values({ frameSetId: id, name, bytes, sha256, contentType, fileKey })
    }
    return id
  }
  const accepted = (groups: Group[]) => [...new Set(groups.filter(each => each.accepted && each.role !== 'dark').map(each => each.repetition))]

  beforeAll(async () => {
    folder = await solverFolder()
    solver = createSolver(folder.entry)
    line = await storedLine(join(folder.root, 'sums'))
    context = { database: handle.database, store, solver, solving: join(root, 'solving') }
  })
  afterAll(async () => {
    await solver?.close()
    folder?.remove()
  })

  it('leaves the named repetitions out, keeps the set’s id, and says who decided, in the set, its manifest, the audit and the live events', async () => {
    const id = await makeSet()
    const before = await getFrameSet(handle.database, id)
    const set = await solveFrameSetAgain(context, analyst, id, [2])
    expect(set.id).toBe(id)
    expect(accepted(set.groups)).toEqual([1, 3])
    expect(set.rejections).toEqual([{ repetition: 2, by: analyst.name, byId: analyst.id, reason: `Rejected by ${analyst.name}.` }])
    expect(set.history).toMatchObject([{ byName: analyst.name, byId: analyst.id, rejected: [2] }])
    expect(set.files.map(file => file.sha256)).not.toEqual(before.files.map(file => file.sha256))
    expect([...readNpz(await bytesOf(id, 'frameset.npz')).accepted!.data]).toEqual([1, 1, 1, 1, 1, 0, 0, 0, 1, 1, 1, 1])
    expect(JSON.parse((await bytesOf(id, 'manifest.json')).toString())).toMatchObject({ rejections: [{ repetition: 2, by: analyst.name }], files: [{ sha256: set.files.find(file => file.name === 'frameset.npz')!.sha256 }] })
    expect((await handle.database.select().from(auditEntries).where(eq(auditEntries.subject, id)))).toMatchObject([{ action: 'frame set solved again', details: { rejected: [2] } }])
    expect((await handle.database.select().from(events).where(eq(events.type, 'acquisition'))).at(-1)!.payload).toEqual({ id: acquisition, campaignId: campaign })
  })

  it('gives files whose size and SHA-256 are what the set states, and takes the old ones away', async () => {
    const id = await makeSet()
    const old = (await filesOf(id)).map(file => file.fileKey)
    await solveFrameSetAgain(context, analyst, id, [3])
    for (const file of await filesOf(id)) expect(createHash('sha256').update(readFileSync(store.localPath(file.fileKey))).digest('hex')).toBe(file.sha256)
    for (const key of old) expect(await store.stat(key)).toBeNull()
    expect(readdirSync(context.solving)).toEqual([])
  })

  it('goes back to the first bytes with an empty list, and changes nothing without one', async () => {
    const id = await makeSet()
    const hashOf = async () => (await filesOf(id)).find(file => file.name === 'frameset.npz')!.sha256
    const first = await hashOf()
    await solveFrameSetAgain(context, analyst, id, [1])
    const without = await hashOf()
    expect((await solveFrameSetAgain(context, analyst, id)).rejections.map(({ repetition }) => repetition)).toEqual([1])
    expect(await hashOf()).toBe(without)
    expect((await solveFrameSetAgain(context, analyst, id, [])).rejections).toEqual([])
    expect(await hashOf()).toBe(first)
  })

  it('keeps the author of a rejection that stays, and remembers what a person took back in', async () => {
    const id = await makeSet({ rejections: [{ repetition: 1, by: 'program', byId: null, reason: 'Camera motion.' }, { repetition: 2, by: 'program', byId: null, reason: 'Camera motion.' }] })
    const set = await solveFrameSetAgain(context, analyst, id, [1])
    expect(set.rejections).toEqual([{ repetition: 1, by: 'program', byId: null, reason: 'Camera motion.' }])
    const [row] = await handle.database.select({ review: frameSets.review }).from(frameSets).where(eq(frameSets.id, id))
    expect(row!.review!.acceptedByPerson).toEqual([2])
    expect(row!.review!.flags).toMatchObject([{ code: 'repetition-rejected', message: expect.stringMatching(/^Repetition 1 was rejected/) }])
  })

  it('refuses, saying why, and changes nothing: unknown repetition, nothing left, released, replaced, made anew right now', async () => {
    const id = await makeSet()
    const files = await filesOf(id)
    await expect(solveFrameSetAgain(context, analyst, id, [9])).rejects.toMatchObject({ code: 'bad-input', options: { fields: { reject: 'There is no repetition 9 in this set, only 1, 2, 3.' } } })
    await expect(solveFrameSetAgain(context, analyst, id, [1, 2, 3])).rejects.toMatchObject({ code: 'not-ready', message: expect.stringMatching(/Accept more groups/) })
    const job = randomUUID()
    const now = new Date()
    await handle.database.insert(jobs).values({ id: job, stage: 'check', acquisitionId: acquisition, state: 'running', priority: 100, queuedAt: now, notBefore: now, attempts: 1, crashes: 0, progress: 0, createdAt: now } as typeof jobs.$inferInsert)
    await expect(solveFrameSetAgain(context, analyst, id, [1])).rejects.toMatchObject({ code: 'wrong-state', message: expect.stringMatching(/right now/) })
    await handle.database.delete(jobs).where(eq(jobs.id, job))
    await handle.database.update(frameSets).set({ supersededAt: now }).where(eq(frameSets.id, id))
    await expect(solveFrameSetAgain(context, analyst, id, [1])).rejects.toMatchObject({ code: 'wrong-state', message: expect.stringMatching(/newer/) })
    await handle.database.update(frameSets).set({ supersededAt: null, state: 'released' }).where(eq(frameSets.id, id))
    await expect(solveFrameSetAgain(context, analyst, id, [1])).rejects.toMatchObject({ code: 'wrong-state', message: expect.stringMatching(/released/) })
    expect(await filesOf(id)).toEqual(files)
    for (const file of files) expect((await store.stat(file.fileKey))!.bytes).toBe(file.bytes)
  })

  it('lets the first of two who decide at once have it; the other’s files are gone', async () => {
    const id = await makeSet()
    const results = await Promise.allSettled([solveFrameSetAgain(context, analyst, id, [1]), solveFrameSetAgain(context, analyst, id, [2])])
    expect(results.map(result => result.status).sort()).toEqual(['fulfilled', 'rejected'])
    expect(results.find(result => result.status === 'rejected')).toMatchObject({ reason: { code: 'changed-meanwhile' } })
    const winner = results[0]!.status === 'fulfilled' ? [2, 3] : [1, 3]
    const set = await getFrameSet(handle.database, id)
    expect(accepted(set.groups)).toEqual(winner)
    expect(set.history).toHaveLength(1)
    for (const file of await filesOf(id)) expect(createHash('sha256').update(readFileSync(store.localPath(file.fileKey))).digest('hex')).toBe(file.sha256)
  })

  it('leaves the set as it was when a release comes in while it solves', async () => {
    const id = await makeSet()
    const slow: Solver = { ...solver, solve: async (payload) => {
      await releaseFrameSet(handle.database, analyst, id, 'Fine as it is.')
      return solver.solve(payload)
    } }
    const files = await filesOf(id)
    await expect(solveFrameSetAgain({ ...context, solver: slow }, analyst, id, [1])).rejects.toMatchObject({ code: 'wrong-state', message: expect.stringMatching(/released in the meantime/) })
    expect(await filesOf(id)).toEqual(files)
    expect(accepted((await getFrameSet(handle.database, id)).groups)).toEqual([1, 2, 3])
  })

  it('settles the check stage’s job that asked for a decision, and renews its flags', async () => {
    const own = await insertAcquisition(handle.database, campaign, analyst.id)
    const id = await makeSet({ flags: [{ code: 'too-few-good-repetitions', severity: 'problem', message: 'Decide.' }] }, own)
    const now = new Date()
    const job = { id: randomUUID(), stage: 'check' as const, acquisitionId: own, state: 'needs review' as const, inputsKey: 'k'.repeat(64), priority: 100, queuedAt: now, notBefore: now, attempts: 1, crashes: 0, progress: 1, createdAt: now }
    await handle.database.insert(jobs).values(job as typeof jobs.$inferInsert)
    await handle.database.insert(stageOutputs).values({ acquisitionId: own, stage: 'check', jobId: job.id, inputsKey: '', outputKey: 'o', facts: {}, files: {}, createdAt: now, flags: [{ code: 'too-few-good-repetitions', severity: 'problem', message: 'Line 1 (400 Hz): Decide.', stage: 'check' }, { code: 'depth', severity: 'warning', message: 'Line 2 (800 Hz): Shallow.', stage: 'check' }] })
    await solveFrameSetAgain(context, analyst, id, [1])
    expect((await handle.database.select().from(jobs).where(eq(jobs.id, job.id)))[0]!.state).toBe('done')
    const [output] = await handle.database.select().from(stageOutputs).where(eq(stageOutputs.acquisitionId, own))
    expect(output!.inputsKey).toBe(job.inputsKey)
    expect(output!.flags.map(({ code }) => code)).toEqual(['depth'])
    expect(output!.files['line-1-frameset.npz']).toBe((await filesOf(id)).find(file => file.name === 'frameset.npz')!.fileKey)
  })
})
