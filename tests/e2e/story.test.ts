import { execFileSync } from 'node:child_process'
import { createHash } from 'node:crypto'
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import type { Group } from '../../shared/measurement'
import type { Acquisition } from '../../shared/schemas/campaigns'
import type { CutList, FrameSet, Job } from '../../shared/schemas/results'
import { eventsUntil, startApplication, type Application, type Client } from '../support/application'
import { buildSchedule, defineScenario, groupFits, groupTruths, renderScene } from '../support/forward'
import { uploadFile } from '../support/transfer'

let application: Application
let technician: Client
let analyst: Client
let folder: string
let campaignId: string
let acquisitionId: string
let set: FrameSet

const scenario = defineScenario({
  seed: 7, width: 192, height: 128, scene: { kind: 'panel', seed: 77, blurPixels: 1.6, contrast: 0.42 },
  camera: { lightPerVolt: 0.36, ambientVolts: 0.004, frameRate: { numerator: 50, denominator: 1 }, exposureSeconds: 0.02 },
  lines: [{ frequencyHz: 233.7, forceNewtons: [2.2, 0.4], field: [{ ux: [0.12, 0.03], uy: [0.02, 0.05], halfWavesX: 2, halfWavesY: 1 }] }],
  lamp: { darkVolts: 0.02, regimes: buildSchedule({ startSeconds: 0.8, lines: [{ frequencyHz: 233.7, repetitions: 3 }], darkSeconds: 0.5, referenceSeconds: 0.9, phaseSeconds: 1, levelVolts: 2.2, depth: 0.92, unevenness: 0.08 }) },
  clock: { offsetSeconds: 0.5123, driftPpm: 12 },
})

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'lampsum-story-'))
  application = await startApplication()
  technician = await application.signIn('technician')
  analyst = await application.signIn('analyst')
  campaignId = (await technician.call<{ id: string }>('POST', '/api/campaigns', { name: 'Housing cover HC-2' })).id
}, 120_000)

afterAll(async () => {
  await application?.stop()
  rmSync(folder, { recursive: true, force: true })
})

const register = async (title: string) => (await technician.call<{ id: string }>('POST', '/api/acquisitions', { campaignId, title, frameExposureSeconds: 0.02, transfer: 'auto', range: 'auto', plan: [{ frequencyHz: 233.7, repetitions: 3 }] })).id
const endOf = (id: string, stage: string) => (event: { type: string, data: Record<string, unknown> }) => event.type === 'job' && event.data.acquisitionId === id && event.data.stage === stage && ['done', 'failed', 'needs review'].includes(event.data.state as string)
const npzOf = async (frameSet: FrameSet) => Buffer.from(await (await analyst.fetch(`/api/frame-sets/${frameSet.id}/files/frameset.npz`)).arrayBuffer())
/** What numpy makes of the clip, and of the set's integrals and sums. */
async function inNumpy(frameSet: FrameSet) {
  const npz = join(folder, 'frameset.npz')
  writeFileSync(npz, await npzOf(frameSet))
  return JSON.parse(execFileSync('/usr/bin/python3', [join(import.meta.dirname, 'sums.py'), join(folder, 'scene.mp4'), npz, '192', '128'], { encoding: 'utf8', maxBuffer: 1 << 26 })) as { equal: boolean[], solved: number, dtypes: Record<string, string>, shape: number[] }
}
const sha256 = (bytes: Buffer) => createHash('sha256').update(bytes).digest('hex')
const currentSet = async () => (await analyst.call<{ items: FrameSet[] }>('GET', `/api/frame-sets?acquisitionId=${acquisitionId}`)).items.find(each => !each.superseded)!

describe('a technician uploads a clip and its record', () => {
  it('from a script with a token and an unmodified tus client, and the frame set is announced on /api/events', async () => {
    const { clipPath, recordPath } = await renderScene(scenario, folder)
    const { token } = await technician.call<{ token: string }>('POST', '/api/tokens', { name: 'rig computer' })
    acquisitionId = await register('take 1')
    const headers = { authorization: `Bearer ${token}` }
    const seen = await eventsUntil(analyst, endOf(acquisitionId, 'check'), {
      onOpen: async () => {
        await uploadFile(application.url, headers, clipPath, { acquisitionId, kind: 'clip' })
        await uploadFile(application.url, headers, recordPath, { acquisitionId, kind: 'record' })
      },
    })
    expect(seen.at(-1)!.data).toMatchObject({ stage: 'check', state: 'done' })
    const ids = seen.map(event => Number(event.id))
    expect(ids, 'ids rise').toEqual([...ids].sort((a, b) => a - b))
    set = await currentSet()
    expect(set).toMatchObject({ state: 'draft', width: 192, height: 128, line: 1 })
  })

  it('ties the clocks as the forward model set them', async () => {
    const { alignment, state, clip } = await analyst.call<Acquisition>('GET', `/api/acquisitions/${acquisitionId}`)
    expect(state).toBe('ready')
    expect(clip).toMatchObject({ range: 'limited', transfer: 'bt709', codec: 'h264' })
    expect(Math.abs(alignment!.offsetSeconds - 0.5123)).toBeLessThan(0.01 * 0.02)
    expect(Math.abs(alignment!.driftPpm - 12)).toBeLessThan(20)
  })

  it('cuts as the truth allows: no frame in a wrong group, no edge frame, at least 90 % used', async () => {
    const { groups } = await analyst.call<CutList>('GET', `/api/acquisitions/${acquisitionId}/cut-list`)
    const truths = groupTruths(scenario)
    const lit = truths.filter(truth => truth.role !== 'dark')
    expect(groups.filter((group: Group) => group.role !== 'dark')).toHaveLength(lit.length)
    for (const truth of lit) {
      const group = groups.find(each => each.role === truth.role && each.repetition === truth.repetition && Math.abs(each.firstFrame - truth.firstFrame) <= 0.11 * truth.frameCount)
      expect(group, `${truth.role} of repetition ${truth.repetition}`).toBeDefined()
      expect(groupFits(truth, group!.firstFrame, group!.frameCount), group!.id).toBe(true)
    }
  })

  it('gets sums that numpy finds equal to its own, and the same least squares', async () => {
    const answer = await inNumpy(set)
    expect(answer.equal.length).toBe(set.groups.length)
    expect(answer.equal.every(Boolean)).toBe(true)
    expect(answer.solved).toBeLessThan(1e-4)
    expect(answer.dtypes).toMatchObject({ sums: 'uint32', frames: 'int32', first_frame: 'int32', repetition: 'int32', role: 'int32', lamp_phase_deg: 'float64', accepted: 'uint8', integrals: 'float64', frequency_hz: 'float64', force: 'complex128', scene: 'float32', p: 'float32', q: 'float32', noise: 'float32' })
  })

  it('can resume a download, prove it, and is spared what has not changed', async () => {
    const file = set.files.find(each => each.name === 'frameset.npz')!
    const whole = await npzOf(set)
    expect(sha256(whole)).toBe(file.sha256)
    const path = `/api/frame-sets/${set.id}/files/frameset.npz`
    const part = await analyst.fetch(path, { headers: { range: 'bytes=1000-1999' } })
    expect(part.status).toBe(206)
    expect(Buffer.from(await part.arrayBuffer()).equals(whole.subarray(1000, 2000))).toBe(true)
    expect(part.headers.get('repr-digest')).toBe(`sha-256=:${Buffer.from(file.sha256, 'hex').toString('base64')}:`)
    expect((await analyst.fetch(path, { headers: { 'if-none-match': part.headers.get('etag')! } })).status).toBe(304)
    expect((await analyst.fetch(path, { headers: { range: 'bytes=999999999-' } })).status).toBe(416)
    const manifest = await (await analyst.fetch(`/api/frame-sets/${set.id}/files/manifest.json`)).json() as { inputs: unknown[], files: { sha256: string }[] }
    expect(manifest.inputs).toHaveLength(2)
    expect(manifest.files[0]!.sha256).toBe(file.sha256)
  })
})

describe('a runner killed in the middle of sum', () => {
  it('leaves the same result after another has taken over', async () => {
    const before = set.files.find(each => each.name === 'frameset.npz')!.sha256
    let killed = 0
    await eventsUntil(analyst, (event) => {
      if (!killed && event.type === 'job' && event.data.stage === 'sum' && event.data.state === 'running') process.kill(killed = application.runnerPid(), 'SIGKILL')
      return endOf(acquisitionId, 'check')(event)
    }, { onOpen: () => analyst.call('POST', `/api/acquisitions/${acquisitionId}/process`, { from: 'sum' }) })
    expect(killed).toBeGreaterThan(0)
    const [sum] = (await analyst.call<{ items: Job[] }>('GET', `/api/jobs?acquisitionId=${acquisitionId}`)).items.filter(job => job.stage === 'sum')
    expect(sum!.attempts).toBe(2)
    const again = await currentSet()
    // The same sums on the same record: the frame set that was there stands.
    expect(again.id).toBe(set.id)
    expect(again.files.find(each => each.name === 'frameset.npz')!.sha256).toBe(before)
  })
})

describe('an edited cut list', () => {
  it('decodes only what changed sides, and numpy finds the sums right', async () => {
    const { groups } = await analyst.call<CutList>('GET', `/api/acquisitions/${acquisitionId}/cut-list`)
    const edited = groups.map((group, index) => index === 2 ? { ...group, firstFrame: group.firstFrame + 2, frameCount: group.frameCount - 3 } : group)
    await eventsUntil(analyst, endOf(acquisitionId, 'check'), { onOpen: () => analyst.call('PUT', `/api/acquisitions/${acquisitionId}/cut-list`, { groups: edited }) })
    const [sum] = (await analyst.call<{ items: Job[] }>('GET', `/api/jobs?acquisitionId=${acquisitionId}`)).items.filter(job => job.stage === 'sum')
    const { log } = await analyst.call<Job & { log: string | null }>('GET', `/api/jobs/${sum!.id}`)
    expect(log).toMatch(/\b3 frames decoded/)
    set = await currentSet()
    expect(set.groups[2]).toMatchObject({ firstFrame: edited[2]!.firstFrame, frameCount: edited[2]!.frameCount })
    const { equal } = await inNumpy(set)
    expect(equal.length).toBe(set.groups.length)
    expect(equal.every(Boolean)).toBe(true)
  })
})

describe('a frame set solved again', () => {
  const solve = (reject: number[]) => analyst.call<FrameSet>('POST', `/api/frame-sets/${set.id}/solve`, { reject })

  it('leaves a repetition out and takes it back, from the stored sums, as numpy solves them', async () => {
    const before = set.files.find(file => file.name === 'frameset.npz')!.sha256
    set = await solve([2])
    expect(set.groups.filter(group => !group.accepted).map(group => group.repetition)).toEqual(set.groups.filter(group => group.repetition === 2 && group.role !== 'dark').map(() => 2))
    expect((await inNumpy(set)).solved).toBeLessThan(1e-4)
    expect(set.files.find(file => file.name === 'frameset.npz')!.sha256).not.toBe(before)
    set = await solve([])
    expect(set.files.find(file => file.name === 'frameset.npz')!.sha256).toBe(before)
  })

  it('is refused to a technician, for a repetition that is not there, and when nothing would be left', async () => {
    const ask = (client: Client, reject: number[]) => client.fetch(`/api/frame-sets/${set.id}/solve`, { method: 'POST', headers: { 'content-type': 'application/json' }, body: JSON.stringify({ reject }) })
    expect((await ask(technician, [2])).status).toBe(403)
    expect((await ask(analyst, [9])).status).toBe(400)
    expect([400, 409]).toContain((await ask(analyst, [1, 2, 3])).status)
  })
})

describe('bad input', () => {
  const badClip = async (name: string, content: string | Buffer) => {
    const path = join(folder, name)
    writeFileSync(path, content)
    const id = await register(name)
    const seen = await eventsUntil(analyst, endOf(id, 'inspect'), { onOpen: () => uploadFile(application.url, { cookie: technician.cookie }, path, { acquisitionId: id, kind: 'clip' }) })
    return seen.at(-1)!.data as { state: string, message: string, errorCode: string }
  }
  const badRecord = async (name: string, content: string) => {
    const path = join(folder, name)
    writeFileSync(path, content)
    const id = await register(name)
    const seen = await eventsUntil(analyst, endOf(id, 'record'), { onOpen: () => uploadFile(application.url, { cookie: technician.cookie }, path, { acquisitionId: id, kind: 'record' }) })
    return seen.at(-1)!.data as { state: string, message: string, errorCode: string }
  }

  it('fails a text file named .mp4 with a sentence', async () => {
    const job = await badClip('notes.mp4', 'These are not the frames you expect.\n'.repeat(40))
    expect(job.state).toBe('failed')
    expect(job.message).toMatch(/[.]$/)
  })

  it('refuses a playlist named .mp4', async () => {
    const job = await badClip('list.mp4', '#EXTM3U\n#EXT-X-TARGETDURATION:1\n#EXTINF:1,\n/etc/hostname\n#EXT-X-ENDLIST\n')
    expect(job).toMatchObject({ state: 'failed', errorCode: 'playlist-refused' })
  })

  it('refuses an empty file before anything is stored', async () => {
    const answer = await technician.fetch('/api/uploads', { method: 'POST', headers: { 'tus-resumable': '1.0.0', 'upload-length': '0', 'upload-metadata': `filename ${btoa('empty.mp4')},acquisitionId ${btoa(acquisitionId)},kind ${btoa('clip')}` } })
    expect(answer.status).toBe(400)
    expect(await answer.text()).toMatch(/empty/i)
  })

  it('asks which column is the illumination when no header says so', async () => {
    const rows = Array.from({ length: 2000 }, (_, i) => `${(i / 1000).toFixed(4)},${Math.sin(i)},${Math.cos(i)}`).join('\n')
    const job = await badRecord('unnamed.csv', `time,alpha,beta\n${rows}\n`)
    expect(job).toMatchObject({ state: 'needs review', errorCode: 'no-illumination' })
  })

  it('takes a record that ends before the clip, leaves the rest out, and says so', async () => {
    const lines = readFileSync(join(folder, 'scene.csv'), 'utf8').split('\n')
    const path = join(folder, 'short.csv')
    writeFileSync(path, `${lines.slice(0, Math.floor(0.55 * lines.length)).join('\n')}\n`)
    const id = await register('short record')
    await eventsUntil(analyst, event => endOf(id, 'check')(event) || (['align', 'cut'].some(stage => endOf(id, stage)(event)) && event.data.state !== 'done'), {
      onOpen: async () => {
        await uploadFile(application.url, { cookie: technician.cookie }, join(folder, 'scene.mp4'), { acquisitionId: id, kind: 'clip' })
        await uploadFile(application.url, { cookie: technician.cookie }, path, { acquisitionId: id, kind: 'record' })
      },
    })
    const acquisition = await analyst.call<Acquisition>('GET', `/api/acquisitions/${id}`)
    expect(acquisition.flags.map(flag => flag.code)).toContain('record-does-not-cover-clip')
    const { groups } = await analyst.call<CutList>('GET', `/api/acquisitions/${id}/cut-list`)
    const truths = groupTruths(scenario)
    for (const group of groups.filter((each: Group) => each.role !== 'dark')) {
      expect(truths.some(truth => truth.role === group.role && group.firstFrame >= truth.allowed.firstFrame.min && group.firstFrame + group.frameCount - 1 <= truth.allowed.lastFrame.max), group.id).toBe(true)
    }
  })

  it('finds nothing under a foreign campaign\'s id and refuses a wrong role', async () => {
    const guest = await application.signIn('guest')
    expect((await guest.fetch(`/api/campaigns/${campaignId}`)).status).toBe(404)
    expect((await guest.fetch(`/api/frame-sets/${set.id}/files/frameset.npz`)).status).toBe(404)
    expect((await guest.fetch(`/api/acquisitions/${acquisitionId}`)).status).toBe(403)
    expect((await technician.fetch(`/api/acquisitions/${acquisitionId}/alignment`, { method: 'PUT', headers: { 'content-type': 'application/json' }, body: '{"offsetSeconds":0,"driftPpm":0}' })).status).toBe(403)
    const refused = await technician.fetch('/api/acquisitions', { method: 'POST', headers: { 'content-type': 'application/json' }, body: JSON.stringify({ campaignId: 'no-such', title: 'x' }) })
    expect(refused.status).toBe(404)
    expect(((await refused.json()) as { data: { code: string } }).data.code).toBe('not-found')
  })

  it('has not held up the queue', async () => {
    const { items } = await analyst.call<{ items: Job[] }>('GET', '/api/jobs?limit=200')
    expect(items.filter(job => ['waiting', 'running'].includes(job.state))).toEqual([])
  })
})

describe('tus 1.0.0, sent raw', () => {
  const creation = () => ({ 'tus-resumable': '1.0.0', 'upload-length': '10', 'upload-metadata': `filename ${btoa('ten.csv')},acquisitionId ${btoa(acquisitionId)},kind ${btoa('record')}` })

  it('announces its version and extensions (protocol: OPTIONS)', async () => {
    const answer = await technician.fetch('/api/uploads', { method: 'OPTIONS' })
    expect(answer.headers.get('tus-version')).toContain('1.0.0')
    expect(answer.headers.get('tus-extension')).toContain('creation')
  })

  it('answers 409 for a wrong offset, keeps the bytes it has, and forgets a terminated upload', async () => {
    const created = await technician.fetch('/api/uploads', { method: 'POST', headers: creation() })
    expect(created.status).toBe(201)
    const location = created.headers.get('location')!
    const path = new URL(location, application.url).pathname
    const patch = (offset: number, body: string) => technician.fetch(path, { method: 'PATCH', headers: { 'tus-resumable': '1.0.0', 'upload-offset': String(offset), 'content-type': 'application/offset+octet-stream' }, body })
    expect((await patch(0, 'abcd')).headers.get('upload-offset')).toBe('4')
    expect((await patch(2, 'xx')).status).toBe(409)
    const head = await technician.fetch(path, { method: 'HEAD', headers: { 'tus-resumable': '1.0.0' } })
    expect([head.headers.get('upload-offset'), head.headers.get('upload-length'), head.headers.get('cache-control')]).toEqual(['4', '10', 'no-store'])
    expect((await technician.fetch(path, { method: 'DELETE', headers: { 'tus-resumable': '1.0.0' } })).status).toBe(204)
    expect((await technician.fetch(path, { method: 'HEAD', headers: { 'tus-resumable': '1.0.0' } })).status).toBeGreaterThanOrEqual(404)
  })

  it('refuses another protocol version with 412', async () => {
    const answer = await technician.fetch('/api/uploads', { method: 'POST', headers: { ...creation(), 'tus-resumable': '0.2.2' } })
    expect(answer.status).toBe(412)
    expect(answer.headers.get('tus-version')).toBe('1.0.0')
  })
})
