import { Worker } from 'node:worker_threads'
import { LampsumError } from '#shared/errors'
import type { SolveAgainPayload, SolvedAgain } from '../../jobs/stages/solveAgain'
import type { ServiceAnswer } from '../../jobs/stages/solveWorker'

/** Solves frame sets again in threads of their own; see jobs/stages/solveWorker.ts. */
export interface Solver {
  solve: (payload: SolveAgainPayload) => Promise<SolvedAgain>
  /** Starts the threads before somebody waits for them. */
  warmUp: () => void
  close: () => Promise<void>
}

const idleMilliseconds = 10 * 60_000
const longestMilliseconds = 120_000

interface Waiting {
  resolve: (result: SolvedAgain) => void
  reject: (error: Error) => void
  timer: NodeJS.Timeout
}

/** @param entry the bundle of solveWorker.ts. The threads end when nobody has asked for ten minutes. */
export function createSolver(entry: string): Solver {
  let worker: Worker | undefined
  let idle: NodeJS.Timeout | undefined
  let lastId = 0
  const waiting = new Map<number, Waiting>()

  const end = async (error: Error) => {
    const ending = worker
    worker = undefined
    clearTimeout(idle)
    for (const { reject, timer } of waiting.values()) {
      clearTimeout(timer)
      reject(error)
    }
    waiting.clear()
    await ending?.terminate()
  }
  const restOrEnd = () => {
    clearTimeout(idle)
    idle = setTimeout(() => void end(new Error('idle')), idleMilliseconds).unref()
  }
  const started = () => {
    if (worker) return worker
    const fresh = new Worker(entry, { workerData: { kind: 'service' } })
    fresh.unref()
    fresh.on('message', (answer: ServiceAnswer) => {
      const { resolve, reject, timer } = waiting.get(answer.id) ?? {}
      waiting.delete(answer.id)
      clearTimeout(timer)
      if ('failure' in answer) reject?.(refusalOf(answer.failure))
      else resolve?.(answer.result)
      if (!waiting.size) restOrEnd()
    })
    fresh.once('error', error => worker === fresh && void end(error instanceof Error ? error : new Error(String(error))))
    fresh.once('exit', () => worker === fresh && void end(new Error('The solving thread ended before it was done')))
    return worker = fresh
  }
  return {
    solve(payload) {
      clearTimeout(idle)
      return new Promise((resolve, reject) => {
        const id = ++lastId
        const timer = setTimeout(() => void end(new Error('Solving took too long')), longestMilliseconds)
        waiting.set(id, { resolve, reject, timer })
        started().postMessage({ id, payload })
      })
    },
    warmUp() {
      started()
      if (!waiting.size) restOrEnd()
    },
    close: () => end(new Error('The server stops')),
  }
}

/** What the threads could not do, as the API says it. */
function refusalOf({ code, message, detail }: { code: string, message: string, detail: string }): Error {
  if (['too-few-groups', 'ill-conditioned', 'sums-damaged'].includes(code)) return new LampsumError('not-ready', message)
  if (code === 'disk-full') return new LampsumError('disk-full')
  return new Error(detail)
}

let solver: Solver | undefined

/** The web server's one solver. */
export function useSolver(): Solver {
  solver ??= createSolver(useRuntimeConfig().solveWorker)
  return solver
}
