import { Worker } from 'node:worker_threads'
import type { Stage } from '../shared/states'
import type { Progress } from './queue/queue'
import type { StageResult } from './stages/stage'

export interface WorkerTask {
  stage: Stage
  payload: unknown
  workDir: string
}

/** What a stage could not do, in a form that crosses threads. */
export interface Failure {
  code: string
  message: string
  review: boolean
  detail: string
}

export type WorkerMessage
  = | { kind: 'progress', progress: Progress }
    | { kind: 'log', line: string }
    | { kind: 'result', result: StageResult }
    | { kind: 'failure', failure: Failure }

export type WorkerOrder = { kind: 'task', task: WorkerTask } | { kind: 'abort' }

export class StageFailure extends Error {
  override name = 'StageFailure'
  constructor(readonly failure: Failure) {
    super(failure.message)
  }
}

const diskCodes = new Set(['ENOSPC', 'EDQUOT'])

/** The runner's one mapper: errors that carry a code and a sentence keep them, others are told plainly. */
export function failureOf(error: unknown): Failure {
  if (error instanceof StageFailure) return error.failure
  const { name, code, message, options, stack } = error as Error & { code?: string, options?: { review?: boolean } }
  const detail = stack ?? String(error)
  if (code && diskCodes.has(code)) return { code: 'disk-full', message: 'The disk is full. This goes on by itself when there is space again.', review: false, detail }
  if (['StageError', 'MediaError', 'RecordError', 'SolveError', 'AlignError'].includes(name) && code) return { code, message, review: options?.review ?? false, detail }
  if (name === 'LampsumError' && code) return { code, message, review: false, detail }
  return { code: 'unexpected', message: `Something unexpected stopped this: ${message}. Retry it once; if it stays, tell the people who keep Lampsum and show them the log.`, review: false, detail }
}

export interface StageRun {
  result: Promise<StageResult>
  abort: () => void
}

/** Threads that are loaded and idle, by entry: a stage of a few milliseconds should not wait for its program. */
const idle = new Map<string, Worker[]>()

/** These fill the memory with pictures and channels; it is given back at once when their thread ends. */
const endsItsThread: ReadonlySet<Stage> = new Set(['record', 'sum', 'check'])
const mostIdle = 2

export function prepareWorker(entry: string): void {
  if (!idle.get(entry)?.length) keepWorker(entry, startWorker(entry))
}

// The pixel pipe's end is closed by its socket: a second closing at the thread's end would hit somebody else's file.
const startWorker = (entry: string) => new Worker(entry, { trackUnmanagedFds: false })

function keepWorker(entry: string, worker: Worker): void {
  const forget = () => idle.set(entry, idle.get(entry)!.filter(other => other !== worker))
  worker.removeAllListeners()
  worker.once('error', forget)
  worker.once('exit', forget)
  worker.unref()
  idle.set(entry, [...idle.get(entry) ?? [], worker])
}

function takeWorker(entry: string): Worker {
  const worker = idle.get(entry)?.shift() ?? startWorker(entry)
  worker.removeAllListeners()
  worker.ref()
  return worker
}

/** Runs a stage in a worker thread. After `abort` it has four seconds to end before it is terminated. */
export function runInWorker(entry: string, task: WorkerTask, onProgress: (progress: Progress) => void, onLog: (line: string) => void): StageRun {
  const worker = takeWorker(entry)
  worker.postMessage({ kind: 'task', task } satisfies WorkerOrder)
  let timer: NodeJS.Timeout | undefined
  const result = new Promise<StageResult>((resolve, reject) => {
    worker.on('message', (message: WorkerMessage) => {
      if (message.kind === 'progress') onProgress(message.progress)
      else if (message.kind === 'log') onLog(message.line)
      else if (message.kind === 'result') resolve(message.result)
      else reject(new StageFailure(message.failure))
    })
    worker.once('error', reject)
    worker.once('exit', code => reject(new Error(`The worker thread ended with code ${code} before it had a result`)))
  }).then((result) => {
    if (timer || endsItsThread.has(task.stage) || (idle.get(entry)?.length ?? 0) >= mostIdle) void worker.terminate()
    else keepWorker(entry, worker)
    return result
  }, (error) => {
    void worker.terminate()
    throw error
  }).finally(() => clearTimeout(timer))
  return {
    result,
    abort() {
      worker.postMessage({ kind: 'abort' } satisfies WorkerOrder)
      timer ??= setTimeout(() => void worker.terminate(), 4000)
    },
  }
}
