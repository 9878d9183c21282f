import { execFile } from 'node:child_process'
import { tmpdir } from 'node:os'
import { fileURLToPath } from 'node:url'
import { join } from 'node:path'
import { promisify } from 'node:util'
import type { Group } from '../../shared/measurement'
import type { CutList, FrameSet, Job } from '../../shared/schemas/results'
import { eventsUntil, startApplication, type Application, type Client } from '../../tests/support/application'
import { uploadFile } from '../../tests/support/transfer'
import { buildIfStale } from '../lib/build'
import { watchMemory } from './memory'
import { heading, row } from './report'
import { makeBenchTake, type BenchTake } from './take'

interface Session {
  application: Application
  technician: Client
  analyst: Client
  acquisitionId: string
}

const run = promisify(execFile)
const seconds = (milliseconds: number) => milliseconds / 1000

async function timed(work: () => unknown): Promise<number> {
  const start = performance.now()
  await work()
  return performance.now() - start
}

/** The speed table: every row a ratio of times taken in this run, minutes apart at most. */
export async function measureSpeed({ seconds: length, keyframeInterval }: { seconds: number, keyframeInterval: number }): Promise<void> {
  const take = await makeBenchTake(join(tmpdir(), 'lampsum-bench'), { seconds: length, width: 1920, height: 1080, keyframeInterval, bitsPerSecond: 28_000_000 })
  await buildIfStale()
  heading(`Speed, one clip of ${length} s at 1920×1080 and 50 frames/s, key frames every ${keyframeInterval}`)
  const application = await startApplication()
  try {
    const session = await openSession(application)
    const decodeBefore = await decodeOnly(take)
    const memory = watchMemory(application.runnerPid())
    const full = await wholeRun(session, take, memory.mark)
    const memories = memory.stop()
    const decodeAfter = await decodeOnly(take)
    const decode = (decodeBefore + decodeAfter) / 2
    row('upload proven → frame sets ready ÷ ffmpeg -f null', full.milliseconds / decode, '≤ 1.40', `${seconds(full.milliseconds).toFixed(1)} s ÷ ${seconds(decode).toFixed(1)} s; ${full.stages}`)
    row('runner + ffmpeg, resident MiB', Math.max(...memories.values()) / 2 ** 20, '≤ 600', [...memories].map(([stage, bytes]) => `${stage} ${Math.round(bytes / 2 ** 20)}`).join(' · '))

    const groups = await cutListOf(session)
    const plain = await timed(() => run('/usr/bin/python3', [fileURLToPath(new URL('plain.py', import.meta.url)), take.clip, ...groups.map(group => `${group.firstFrame}:${group.frameCount}`)]))
    row('upload proven → frame sets ready ÷ OpenCV/NumPy script', full.milliseconds / plain, '< 1', `the script decodes and adds only: ${seconds(plain).toFixed(1)} s`)

    const moved = await moveBoundary(session, groups)
    row('moving one boundary ÷ full run', moved.milliseconds / full.milliseconds, '≤ 0.05', `${seconds(moved.milliseconds).toFixed(2)} s; ${moved.stages}`)
    row('the same sums as a full run', Number(moved.identical), '= 1', 'frameset.npz of every line, SHA-256')
  } finally {
    await application.stop()
  }
}

const decodeOnly = ({ clip }: BenchTake) => timed(() => run('ffmpeg', ['-nostdin', '-v', 'error', '-i', clip, '-f', 'null', '-']))

async function openSession(application: Application): Promise<Session> {
  const technician = await application.signIn('technician')
  const campaignId = (await technician.call<{ id: string }>('POST', '/api/campaigns', { name: 'Bench' })).id
  const acquisitionId = (await technician.call<{ id: string }>('POST', '/api/acquisitions', { campaignId, title: 'Bench take', plan: [{ frequencyHz: 412.3, repetitions: 5 }, { frequencyHz: 731.9, repetitions: 5 }] })).id
  return { application, technician, analyst: await application.signIn('analyst'), acquisitionId }
}

/** From the moment the last file is proven to the end of the check stage. */
async function wholeRun({ application, technician, analyst, acquisitionId }: Session, take: BenchTake, onStage: (stage: string) => void): Promise<{ milliseconds: number, stages: string }> {
  let start = 0
  let stored = 0
  await eventsUntil(analyst, (event) => {
    if (event.type === 'upload' && event.data.state === 'stored' && ++stored === 2) start = performance.now()
    if (event.type === 'job' && event.data.state === 'running' && event.data.acquisitionId === acquisitionId) onStage(event.data.stage as string)
    return isEnd(acquisitionId, 'check')(event)
  }, {
    signal: AbortSignal.timeout(3_600_000),
    onOpen: async () => {
      await uploadFile(application.url, { cookie: technician.cookie }, take.record, { acquisitionId, kind: 'record' })
      await uploadFile(application.url, { cookie: technician.cookie }, take.clip, { acquisitionId, kind: 'clip' })
    },
  })
  return { milliseconds: performance.now() - start, stages: await stageTimes(analyst, acquisitionId) }
}

function isEnd(acquisitionId: string, stage: string) {
  return ({ type, data }: { type: string, data: Record<string, unknown> }) => {
    if (type !== 'job' || data.acquisitionId !== acquisitionId) return false
    if (['failed', 'needs review'].includes(data.state as string)) throw new Error(`${String(data.stage)}: ${String(data.message)}`)
    return data.stage === stage && data.state === 'done'
  }
}

/** Seconds that each stage's newest job ran, in the order of their start. */
async function stageTimes(analyst: Client, acquisitionId: string, since = 0): Promise<string> {
  const { items } = await analyst.call<{ items: Job[] }>('GET', `/api/jobs?acquisitionId=${acquisitionId}&limit=50`)
  return items.filter(job => job.startedAt && job.finishedAt && Date.parse(job.startedAt) >= since).sort((a, b) => Date.parse(a.startedAt!) - Date.parse(b.startedAt!))
    .map(job => `${job.stage} ${seconds(Date.parse(job.finishedAt!) - Date.parse(job.startedAt!)).toFixed(2)}`).join(' · ')
}

const cutListOf = async ({ analyst, acquisitionId }: Session) => (await analyst.call<CutList>('GET', `/api/acquisitions/${acquisitionId}/cut-list`)).groups

/** One group starts three frames later; afterwards everything is summed again from nothing. */
async function moveBoundary(session: Session, groups: Group[]): Promise<{ milliseconds: number, identical: boolean, stages: string }> {
  const { analyst, acquisitionId } = session
  const at = Math.floor(groups.length / 2)
  const edited = groups.map((group, index) => index === at ? { ...group, firstFrame: group.firstFrame + 3, frameCount: group.frameCount - 3 } : group)
  const since = Date.now()
  const milliseconds = await timed(() => eventsUntil(analyst, isEnd(acquisitionId, 'check'), { onOpen: () => analyst.call('PUT', `/api/acquisitions/${acquisitionId}/cut-list`, { groups: edited }) }))
  const stages = await stageTimes(analyst, acquisitionId, since)
  const byDifference = await setHashes(session)
  await eventsUntil(analyst, isEnd(acquisitionId, 'check'), { signal: AbortSignal.timeout(3_600_000), onOpen: () => analyst.call('POST', `/api/acquisitions/${acquisitionId}/process`, { from: 'sum' }) })
  return { milliseconds, stages, identical: byDifference === await setHashes(session) }
}

async function setHashes({ analyst, acquisitionId }: Session): Promise<string> {
  const { items } = await analyst.call<{ items: FrameSet[] }>('GET', `/api/frame-sets?acquisitionId=${acquisitionId}`)
  return items.filter(set => !set.superseded).sort((a, b) => a.line - b.line).map(set => set.files.find(file => file.name === 'frameset.npz')!.sha256).join()
}
