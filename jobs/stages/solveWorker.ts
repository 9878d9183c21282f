/**
 * Worker thread, bundled beside the stage worker. As `tasks` it is one thread of a pool; as `service` it solves frame sets again
 * for the web server, one after the other, with a pool that stays warm.
 */
import { parentPort, workerData } from 'node:worker_threads'
import { failureOf, type Failure } from '../stageProcess'
import { solveAgain, type SolveAgainPayload, type SolvedAgain } from './solveAgain'
import { createSolvePool, type PoolAnswer } from './solvePool'
import { runSolveTask, type SolveTask } from './solveTasks'

export interface ServiceRequest {
  id: number
  payload: SolveAgainPayload
}
export type ServiceAnswer = { id: number } & ({ result: SolvedAgain } | { failure: Failure })

const port = parentPort!
const { kind, threads } = workerData as { kind: 'tasks' | 'service', threads?: number }

if (kind === 'tasks') {
  port.on('message', (task: SolveTask) => {
    try {
      port.postMessage({ result: runSolveTask(task) } satisfies PoolAnswer)
    } catch (error) {
      port.postMessage({ failure: failureOf(error) } satisfies PoolAnswer)
    }
  })
} else {
  const pool = createSolvePool(threads ? { threads } : {})
  let last: Promise<unknown> = pool.warmUp().catch(() => {})
  port.on('message', ({ id, payload }: ServiceRequest) => {
    last = last.then(() => solveAgain(payload, pool)).then(
      result => port.postMessage({ id, result } satisfies ServiceAnswer),
      error => port.postMessage({ id, failure: failureOf(error) } satisfies ServiceAnswer),
    )
  })
}
