import type { Job, QueueStatus } from '#shared/schemas/results'
import { jobActions, jobStates, type JobAction, type JobState } from '#shared/states'

/** Jobs the browser knows, kept fresh by live events; the strip and the Queue page read the same ones. */
export const useJobsStore = defineStore('jobs', () => {
  const api = useApi()
  const session = useSessionStore()
  const { announce } = useAnnounce()
  const byId = ref<Record<string, Job>>({})
  const queue = ref<QueueStatus | null>(null)
  const cursors = ref<Partial<Record<JobState, string | null>>>({})

  const all = computed(() => sortJobs(Object.values(byId.value)))
  const running = computed(() => all.value.filter(job => job.state === 'running'))
  const waitingCount = computed(() => queue.value?.counts.waiting ?? 0)

  function put(jobs: Job[]) {
    byId.value = { ...byId.value, ...Object.fromEntries(jobs.map(job => [job.id, job])) }
  }
  async function loadState(state: JobState, limit: number, cursor?: string) {
    const page = await api<Page<Job>>('/api/jobs', { query: { state, limit, cursor } })
    if (!cursor) byId.value = Object.fromEntries(Object.entries(byId.value).filter(([, job]) => job.state !== state))
    put(page.items)
    cursors.value = { ...cursors.value, [state]: page.nextCursor }
  }
  async function loadQueue() {
    queue.value = await api<QueueStatus>('/api/queue')
  }
  /** What the strip shows. */
  async function loadRunning() {
    if (!session.may('job.read')) return
    await Promise.all([loadState('running', 50), loadQueue()])
  }
  /** What the Queue page shows: everything that is not over, and the newest of what is. */
  async function loadAll() {
    await Promise.all([loadQueue(), ...jobStates.map(state => loadState(state, state === 'done' || state === 'cancelled' ? 50 : 200))])
  }

  const calmQueue = calm(() => loadQueue().catch(() => undefined), 400)
  async function apply(payload: LivePayload) {
    const known = byId.value[payload.id]
    const next = known || 'stage' in payload ? { ...known, ...payload } as Job : await api<Job>(`/api/jobs/${payload.id}`).catch(() => null)
    if (!next) return
    put([next])
    if (known?.state === next.state) return
    calmQueue()
    if (next.state === 'failed' || next.state === 'needs review') announce(`${next.stage} of acquisition ${next.acquisitionNumber}: ${next.state}.`)
  }
  async function act(job: Job, action: JobAction) {
    await api(`/api/jobs/${job.id}/${action}`, { method: 'POST' })
    put([await api<Job>(`/api/jobs/${job.id}`)])
    calmQueue()
  }
  async function setPriority(job: Job, priority: number) {
    await api(`/api/jobs/${job.id}`, { method: 'PATCH', body: { priority } })
    put([{ ...job, priority }])
  }
  async function setPaused(paused: boolean) {
    await api(`/api/queue/${paused ? 'pause' : 'resume'}`, { method: 'POST' })
    await loadQueue()
  }
  const actionsOf = (job: Job) => (Object.keys(jobActions) as JobAction[]).filter(action => (jobActions[action] as readonly JobState[]).includes(job.state))
  function forget() {
    byId.value = {}
    queue.value = null
    cursors.value = {}
  }
  return { byId, all, running, queue, waitingCount, cursors, loadState, loadRunning, loadAll, loadQueue, apply, act, setPriority, setPaused, actionsOf, forget }
})

const order: readonly JobState[] = ['running', 'needs review', 'failed', 'waiting', 'on hold', 'done', 'cancelled']

/** Running first, then what needs a person, then the line in the order it will run, then what is over, newest first. */
export function sortJobs(jobs: Job[]): Job[] {
  const time = (job: Job) => job.finishedAt ?? job.startedAt ?? job.createdAt
  return [...jobs].sort((a, b) => order.indexOf(a.state) - order.indexOf(b.state)
    || (a.state === 'waiting' ? a.priority - b.priority || a.createdAt.localeCompare(b.createdAt) : time(b).localeCompare(time(a)))
    || a.id.localeCompare(b.id))
}

function calm(work: () => unknown, milliseconds: number) {
  let timer: ReturnType<typeof setTimeout> | undefined
  return () => {
    clearTimeout(timer)
    timer = setTimeout(work, milliseconds)
  }
}
