import type { Upload as Transfer } from 'tus-js-client'
import type { Acquisition, Upload } from '#shared/schemas/campaigns'

export type SendingState = 'queued' | 'sending' | 'paused' | 'waiting' | 'verifying' | 'stored' | 'refused' | 'stopped'
export interface Sending {
  key: string
  filename: string
  kind: FileKind
  acquisitionId: string
  acquisitionTitle: string
  uploadId: string | null
  state: SendingState
  bytes: number
  sentBytes: number
  bytesPerSecond: number | null
  sha256: string | null
  message: string | null
}

const atOnce = 3
const againSeconds = 15
const memory = (uploadId: string) => `lampsum-upload-${uploadId}`

/** Files on their way from this tab. Lives across pages; the bytes are only safe when the state says `stored`. */
export const useUploadsStore = defineStore('uploads', () => {
  const api = useApi()
  const session = useSessionStore()
  const { announce } = useAnnounce()
  const items = ref<Sending[]>([])
  const files = new Map<string, File>()
  const transfers = new Map<string, Transfer>()
  const meters = new Map<string, ReturnType<typeof speedMeter>>()
  let counter = 0

  const moving = computed(() => items.value.filter(item => ['queued', 'sending', 'waiting'].includes(item.state)))
  const active = computed(() => items.value.filter(item => !['stored', 'refused'].includes(item.state)))
  const of = (acquisitionId: string) => items.value.filter(item => item.acquisitionId === acquisitionId)
  const find = (key: string) => items.value.find(item => item.key === key)

  function add(file: File, kind: FileKind, acquisition: { id: string, title: string }, continues?: Upload) {
    const key = `file-${++counter}`
    files.set(key, file)
    meters.set(key, speedMeter())
    items.value.push({
      key, filename: file.name, kind, acquisitionId: acquisition.id, acquisitionTitle: acquisition.title, uploadId: continues?.id ?? null,
      state: 'queued', bytes: file.size, sentBytes: continues?.receivedBytes ?? 0, bytesPerSecond: null, sha256: null, message: null,
    })
    next()
  }

  function next() {
    const sending = items.value.filter(item => item.state === 'sending').length
    for (const item of items.value.filter(entry => entry.state === 'queued').slice(0, Math.max(0, atOnce - sending))) void send(item)
  }

  async function send(item: Sending) {
    const file = files.get(item.key)
    if (!file) return
    item.state = 'sending'
    item.message = null
    meters.get(item.key)?.reset()
    // A lost session is found out before the transfer asks: a refused request would make it start afresh.
    await session.load().catch(() => undefined)
    if (!session.user) return hold(item, 'sign-in', 'You were signed out. Sign in again; it goes on where it stopped.')
    const sample = await sampleFile(file).catch(() => null)
    if (sample === null) return stop(item, 'The file can no longer be read. Drop it again.')
    const known = item.uploadId && localStorage.getItem(memory(item.uploadId))
    if (known && known !== sample) return refuse(item, 'This file has the name and size of the unfinished one, but other content, so nothing was sent. Pick the right file.')
    if (find(item.key)?.state !== 'sending') return
    transfers.set(item.key, await startTransfer(file, item, {
      located: (uploadId) => {
        item.uploadId = uploadId
        localStorage.setItem(memory(uploadId), sample)
      },
      progress: sent => progress(item, sent),
      sent: () => verifying(item),
      failed: cause => failed(item, cause),
    }))
    if (find(item.key)?.state !== 'sending') await transfers.get(item.key)?.abort()
  }
  function failed(item: Sending, cause: unknown) {
    const { waits, message } = uploadProblem(cause)
    if (waits === 'person') stop(item, message)
    else hold(item, waits, message)
  }

  function progress(item: Sending, sent: number) {
    const meter = meters.get(item.key)
    meter?.add(sent, performance.now() / 1000)
    item.sentBytes = sent
    item.bytesPerSecond = meter?.bytesPerSecond ?? null
  }
  function verifying(item: Sending) {
    Object.assign(item, { state: 'verifying', sentBytes: item.bytes, bytesPerSecond: null, message: null })
    transfers.delete(item.key)
    void watchProof(item)
    next()
  }
  /** Live events bring the proof; this asks, too, should they be late or away. */
  async function watchProof(item: Sending) {
    while (find(item.key)?.state === 'verifying') {
      const acquisition = await api<Acquisition>(`/api/acquisitions/${item.acquisitionId}`).catch(() => null)
      const upload = acquisition?.uploads.find(entry => entry.id === item.uploadId)
      if (upload) apply(upload)
      await new Promise(resolve => setTimeout(resolve, 3000))
    }
  }
  function apply(upload: Partial<Upload> & { id: string }) {
    const item = items.value.find(entry => entry.uploadId === upload.id)
    if (!item || item.state === 'stored') return
    if (upload.state === 'stored') {
      Object.assign(item, { state: 'stored', sentBytes: item.bytes, sha256: upload.sha256 ?? null, message: null })
      finish(item)
      announce(`${item.filename} is stored.`)
    } else if (upload.state === 'refused') {
      Object.assign(item, { state: 'refused', message: upload.message ?? 'The server refused this file.' })
      finish(item)
      announce(`${item.filename} was refused.`)
    } else if (upload.state === 'removed') {
      forget(item)
    }
  }
  function finish(item: Sending) {
    if (item.uploadId) localStorage.removeItem(memory(item.uploadId))
    files.delete(item.key)
    transfers.delete(item.key)
    next()
  }
  /** Turned away before a byte was sent; what the server holds stays as it is. */
  function refuse(item: Sending, message: string) {
    Object.assign(item, { state: 'refused', uploadId: null, message })
    files.delete(item.key)
    next()
  }
  function stop(item: Sending, message: string) {
    Object.assign(item, { state: 'stopped', message, bytesPerSecond: null })
    next()
  }
  function hold(item: Sending, why: 'network' | 'sign-in', message: string) {
    Object.assign(item, { state: 'waiting', message, bytesPerSecond: null })
    if (why === 'sign-in') void session.load().catch(() => undefined)
    if (why === 'network') setTimeout(() => find(item.key)?.state === 'waiting' && resume(item), againSeconds * 1000)
    next()
  }

  async function pause(item: Sending) {
    item.state = 'paused'
    item.bytesPerSecond = null
    await transfers.get(item.key)?.abort()
    next()
  }
  function resume(item: Sending) {
    if (!['paused', 'waiting', 'stopped'].includes(item.state)) return
    item.state = 'queued'
    item.message = null
    next()
  }
  async function remove(item: Sending) {
    await transfers.get(item.key)?.abort()
    if (item.uploadId && !['stored', 'refused'].includes(item.state)) await removeRemote(item.uploadId)
    forget(item)
    next()
  }
  async function removeRemote(uploadId: string) {
    const response = await fetch(`/api/uploads/${uploadId}`, { method: 'DELETE', headers: { 'Tus-Resumable': '1.0.0' } })
    if (!response.ok && response.status !== 404 && response.status !== 410) throw toProblem({ status: response.status, data: await response.json().catch(() => undefined) })
    localStorage.removeItem(memory(uploadId))
  }
  function forget(item: Sending) {
    items.value = items.value.filter(entry => entry.key !== item.key)
    for (const map of [files, transfers, meters]) map.delete(item.key)
  }
  /** The network or the session is back. */
  function wake() {
    for (const item of items.value.filter(entry => entry.state === 'waiting')) resume(item)
  }
  return { items, moving, active, of, add, pause, resume, remove, removeRemote, apply, wake }
})
