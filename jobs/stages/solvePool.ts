import { existsSync } from 'node:fs'
import { availableParallelism } from 'node:os'
import { dirname, join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { Worker } from 'node:worker_threads'
import { failureOf, StageFailure, type Failure } from '../stageProcess'
import { runSolveTask, type SolveTask, type TaskResults } from './solveTasks'

/** A few threads that work on pixels. What comes out does not depend on how many there are. */
export interface SolvePool {
  run: <T extends SolveTask>(task: T) => Promise<TaskResults[T['kind']]>
  /** Lets every thread compile its loops before somebody waits for them. */
  warmUp: () => Promise<void>
  close: () => Promise<void>
}

export type PoolAnswer = { result: TaskResults[SolveTask['kind']] } | { failure: Failure }

/** The bundle of solveWorker.ts lies beside the one that this code is in; null where it is run from its sources. */
export function solveWorkerEntry(): string | null {
  const entry = join(dirname(fileURLToPath(import.meta.url)), 'solveWorker.mjs')
  return existsSync(entry) ? entry : null
}

/** @param threads 1 works in the caller's own thread, one task after the other */
export function createSolvePool({ threads = Math.min(4, availableParallelism()), entry = solveWorkerEntry() }: { threads?: number, entry?: string | null } = {}): SolvePool {
  return threads > 1 && entry ? new ThreadPool(threads, entry) : inOwnThread()
}

function inOwnThread(): SolvePool {
  let last: Promise<unknown> = Promise.resolve()
  return {
    run(task) {
      const result = last.then(() => new Promise<void>(resolve => setImmediate(resolve))).then(() => runSolveTask(task))
      last = result.catch(() => {})
      return result
    },
    async warmUp() {
      runSolveTask({ kind: 'warm up' })
    },
    close: async () => {},
  }
}

interface Waiting {
  task: SolveTask
  resolve: (result: never) => void
  reject: (error: Error) => void
}

class ThreadPool implements SolvePool {
  private readonly idle: Worker[] = []
  private readonly busy = new Map<Worker, Waiting>()
  private readonly queue: Waiting[] = []
  private broken: Error | null = null

  constructor(private readonly threads: number, private readonly entry: string) {}

  run<T extends SolveTask>(task: T): Promise<TaskResults[T['kind']]> {
    return new Promise((resolve, reject) => {
      if (this.broken) return reject(this.broken)
      this.queue.push({ task, resolve, reject })
      this.next()
    })
  }

  async warmUp(): Promise<void> {
    await Promise.all(Array.from({ length: this.threads }, () => this.run({ kind: 'warm up' })))
  }

  async close(): Promise<void> {
    const workers = [...this.idle, ...this.busy.keys()]
    this.broken ??= new Error('The threads were stopped')
    this.idle.length = 0
    await Promise.all(workers.map(worker => worker.terminate()))
  }

  private next(): void {
    if (!this.queue.length) return
    const worker = this.idle.pop() ?? (this.busy.size < this.threads ? this.start() : undefined)
    if (!worker) return
    const waiting = this.queue.shift()!
    this.busy.set(worker, waiting)
    worker.postMessage(waiting.task)
  }

  private start(): Worker {
    const worker = new Worker(this.entry, { workerData: { kind: 'tasks' } })
    worker.on('message', (answer: PoolAnswer) => {
      const waiting = this.busy.get(worker)
      this.busy.delete(worker)
      this.idle.push(worker)
      if ('failure' in answer) waiting?.reject(new StageFailure(answer.failure))
      else waiting?.resolve(answer.result as never)
      this.next()
    })
    worker.once('error', error => this.fail(failureError(error)))
    worker.once('exit', () => this.fail(new Error('A thread that works on pixels ended before it was done')))
    return worker
  }

  private fail(error: Error): void {
    this.broken ??= error
    for (const { reject } of [...this.busy.values(), ...this.queue]) reject(this.broken)
    this.busy.clear()
    this.queue.length = 0
  }
}

const failureError = (error: unknown) => error instanceof Error ? error : new StageFailure(failureOf(error))
