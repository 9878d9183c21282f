import { createPinia, setActivePinia } from 'pinia'
import { beforeEach, describe, expect, it, vi } from 'vitest'
import type { TransferListener, TransferPlan } from '../../../composables/tusTransfer'
import { speedMeter, uploadProblem } from '../../../composables/uploadFiles'
import { stubAutoImports } from './autoImports'

interface Running { file: File, plan: TransferPlan, listener: TransferListener, abort: ReturnType<typeof vi.fn> }
const running: Running[] = []
const session = { user: { id: 'me' } as { id: string } | null, load: vi.fn(async () => {}) }
const api = vi.fn(async (): Promise<unknown> => ({ uploads: [] }))
const samples = new Map<string, string>()
const kept = new Map<string, string>()

stubAutoImports({
  speedMeter, uploadProblem,
  useApi: () => api, useSessionStore: () => session, useAnnounce: () => ({ announce: vi.fn() }),
  sampleFile: async (file: File) => samples.get(file.name) ?? `${file.name}-${file.size}`,
  startTransfer: async (file: File, plan: TransferPlan, listener: TransferListener) => {
    const abort = vi.fn(async () => {})
    running.push({ file, plan: { ...plan }, listener, abort })
    return { abort }
  },
  localStorage: { getItem: (key: string) => kept.get(key) ?? null, setItem: (key: string, value: string) => kept.set(key, value), removeItem: (key: string) => kept.delete(key) },
})
const { useUploadsStore } = await import('../../../stores/uploads')

const file = (name: string, size = 100) => ({ name, size, type: '' }) as File
const acquisition = { id: 'a1', title: 'sweep A' }
const settle = () => vi.waitFor(() => undefined).then(() => new Promise(resolve => setTimeout(resolve, 5)))
const refusal = (status: number) => ({ originalResponse: { getStatus: () => status, getBody: () => '' } })

let uploads: ReturnType<typeof useUploadsStore>
beforeEach(() => {
  setActivePinia(createPinia())
  uploads = useUploadsStore()
  running.length = 0
  kept.clear()
  samples.clear()
  session.user = { id: 'me' }
})

describe('files on their way', () => {
  it('sends three at once and the next when one is through', async () => {
    for (let index = 0; index < 5; index++) uploads.add(file(`take-${index}.mp4`), 'clip', acquisition)
    await settle()
    expect(running).toHaveLength(3)
    running[0]!.listener.located('u0')
    running[0]!.listener.sent()
    await settle()
    expect(running).toHaveLength(4)
  })
  it('says stored only when the server has proven the hash, not when the last byte has left', async () => {
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    running[0]!.listener.located('u1')
    running[0]!.listener.progress(100)
    running[0]!.listener.sent()
    expect(uploads.items[0]).toMatchObject({ state: 'verifying', uploadId: 'u1', sha256: null })
    uploads.apply({ id: 'u1', state: 'stored', sha256: 'b5bb9d' })
    expect(uploads.items[0]).toMatchObject({ state: 'stored', sha256: 'b5bb9d' })
    expect(uploads.moving).toHaveLength(0)
  })
  it('finds the proof by asking, too, when no event comes', async () => {
    api.mockResolvedValueOnce({ uploads: [{ id: 'u1', state: 'refused', message: 'This is not a video.' }] })
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    running[0]!.listener.located('u1')
    running[0]!.listener.sent()
    await settle()
    expect(uploads.items[0]).toMatchObject({ state: 'refused', message: 'This is not a video.' })
  })
  it('pauses by aborting, and goes on with the same upload', async () => {
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    running[0]!.listener.located('u1')
    await uploads.pause(uploads.items[0]!)
    expect(running[0]!.abort).toHaveBeenCalled()
    uploads.resume(uploads.items[0]!)
    await settle()
    expect(running[1]!.plan.uploadId).toBe('u1')
  })
})

describe('going on another day', () => {
  const unfinished = { id: 'u7', receivedBytes: 61 } as never
  it('continues the unfinished upload from what is there', async () => {
    uploads.add(file('C0042.MP4'), 'clip', acquisition, unfinished)
    await settle()
    expect(uploads.items[0]!.sentBytes).toBe(61)
    expect(running[0]!.plan.uploadId).toBe('u7')
  })
  it('turns another file of the same name and size away without a byte, and leaves the upload alone', async () => {
    kept.set('lampsum-upload-u7', 'right content')
    samples.set('C0042.MP4', 'other content')
    uploads.add(file('C0042.MP4'), 'clip', acquisition, unfinished)
    await settle()
    expect(running).toHaveLength(0)
    expect(uploads.items[0]).toMatchObject({ state: 'refused', uploadId: null })
    expect(kept.get('lampsum-upload-u7')).toBe('right content')
  })
})

describe('interruptions', () => {
  it('does not ask the server with a session that has run out', async () => {
    session.user = null
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    expect(running).toHaveLength(0)
    expect(uploads.items[0]!.state).toBe('waiting')
    session.user = { id: 'me' }
    uploads.wake()
    await settle()
    expect(running).toHaveLength(1)
  })
  it('keeps its upload when the session ends in the middle, and goes on after sign-in', async () => {
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    running[0]!.listener.located('u1')
    running[0]!.listener.failed(refusal(401))
    expect(uploads.items[0]!.state).toBe('waiting')
    uploads.wake()
    await settle()
    expect(running[1]!.plan.uploadId).toBe('u1')
  })
  it('stops with a sentence where only a person can help', async () => {
    uploads.add(file('C0042.MP4'), 'clip', acquisition)
    await settle()
    running[0]!.listener.failed(refusal(413))
    expect(uploads.items[0]).toMatchObject({ state: 'stopped', message: 'This file is larger than allowed.' })
  })
})
