import { existsSync, readdirSync, readFileSync, rmSync, mkdtempSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import type { Mail } from '../../shared/schemas/people'
import type { Job } from '../../shared/schemas/results'
import { childrenOf, eventsUntil, startApplication, type Application, type Client } from '../support/application'
import { buildSchedule, defineScenario, renderScene } from '../support/forward'
import { uploadFile } from '../support/transfer'

let application: Application
let admin: Client

beforeAll(async () => {
  application = await startApplication()
  admin = await application.signIn('admin')
}, 120_000)
afterAll(() => application?.stop())

const post = (path: string, body: unknown, headers: Record<string, string> = {}) => fetch(`${application.url}${path}`, { method: 'POST', headers: { 'content-type': 'application/json', ...headers }, body: JSON.stringify(body) })

describe('people', () => {
  it('are invited by e-mail, set a password by the link once, and can sign in', async () => {
    await admin.call('POST', '/api/people', { email: 'wenda@lab.example', name: 'Wenda Ostrow', role: 'operator' })
    const mail = (await admin.call<{ items: Mail[] }>('GET', '/api/mails')).items.find(each => each.to.includes('wenda@lab.example'))!
    const token = /token=([\w-]+)/.exec(mail.text)![1]
    const accept = () => post('/api/auth/accept-link', { token, password: 'a long enough one' })
    expect((await accept()).status).toBe(200)
    expect((await accept()).status).toBe(410)
    const answer = await post('/api/auth/sign-in', { email: 'wenda@lab.example', password: 'a long enough one' })
    expect(await answer.json()).toMatchObject({ role: 'operator' })
  })

  it('get the same answer for an unknown e-mail and a wrong password', async () => {
    const [unknown, wrong] = await Promise.all([post('/api/auth/sign-in', { email: 'nobody@lab.example', password: 'x' }), post('/api/auth/sign-in', { email: 'guest@demo.lampsum.example', password: 'x' })])
    expect([unknown.status, wrong.status]).toEqual([401, 401])
    expect(await unknown.json()).toEqual(await wrong.json())
  })

  it('are out after signing out, even with a copy of the cookie', async () => {
    const operator = await application.signIn('operator')
    expect((await operator.fetch('/api/auth/me')).status).toBe(200)
    await operator.call('POST', '/api/auth/sign-out')
    expect((await operator.fetch('/api/auth/me')).status).toBe(401)
  })

  it('cannot be made to act by another site', async () => {
    const answer = await post('/api/campaigns', { name: 'x' }, { 'cookie': admin.cookie, 'sec-fetch-site': 'cross-site', 'origin': 'https://elsewhere.example' })
    expect(answer.status).toBe(403)
    expect(((await answer.json()) as { data: { code: string } }).data.code).toBe('cross-site')
  })

  it('lose a token\'s access when it is revoked', async () => {
    const { id, token } = await admin.call<{ id: string, token: string }>('POST', '/api/tokens', { name: 'old computer' })
    const me = () => fetch(`${application.url}/api/auth/me`, { headers: { authorization: `Bearer ${token}` } })
    expect((await me()).status).toBe(200)
    await admin.call('DELETE', `/api/tokens/${id}`)
    expect((await me()).status).toBe(401)
  })
})

describe('cancelling in the middle of a decode', () => {
  it('ends ffmpeg within 5 s and leaves no temporary files', async () => {
    const folder = mkdtempSync(join(tmpdir(), 'lampsum-cancel-'))
    const scenario = defineScenario({
      seed: 3, width: 640, height: 480, scene: { kind: 'speckle', seed: 31, blurPixels: 1.6, contrast: 0.4 }, camera: { lightPerVolt: 0.36 },
      lines: [{ frequencyHz: 150, forceNewtons: [1, 0], field: [] }],
      lamp: { darkVolts: 0.02, regimes: buildSchedule({ startSeconds: 0.5, lines: [{ frequencyHz: 150, repetitions: 2 }], darkSeconds: 0.5, referenceSeconds: 1, phaseSeconds: 1, levelVolts: 2, depth: 0.9 }) },
      clock: { offsetSeconds: 0.2, driftPpm: 0 },
    })
    const { clipPath } = await renderScene(scenario, folder)
    const { id: campaignId } = await admin.call<{ id: string }>('POST', '/api/campaigns', { name: 'Bracket BR-1' })
    const { id: acquisitionId } = await admin.call<{ id: string }>('POST', '/api/acquisitions', { campaignId, title: 'take 1' })
    const runner = application.runnerPid()
    const decoding = () => childrenOf(runner).some(pid => existsSync(`/proc/${pid}/cmdline`) && readFileSync(`/proc/${pid}/cmdline`, 'utf8').includes('ffmpeg'))
    let jobId = ''
    await eventsUntil(admin, event => event.type === 'job' && event.data.stage === 'meter' && event.data.state === 'running' && Boolean(jobId = event.data.id as string), {
      onOpen: () => uploadFile(application.url, { cookie: admin.cookie }, clipPath, { acquisitionId, kind: 'clip' }),
    })
    await expect.poll(decoding, { timeout: 5000, interval: 20 }).toBe(true)
    await admin.call('POST', `/api/jobs/${jobId}/cancel`)
    await expect.poll(decoding, { timeout: 5000 }).toBe(false)
    await expect.poll(async () => (await admin.call<Job>('GET', `/api/jobs/${jobId}`)).state, { timeout: 5000 }).toBe('cancelled')
    const work = join(application.dataDir, 'work')
    await expect.poll(() => readdirSync(work).flatMap(each => readdirSync(join(work, each))), { timeout: 5000 }).toEqual([])
    rmSync(folder, { recursive: true })
  })
})
