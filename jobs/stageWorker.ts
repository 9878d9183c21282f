/** Worker thread: runs one stage after another. Pixels are touched here and in ffmpeg, so the runner's heartbeat never stalls. */
import { parentPort } from 'node:worker_threads'
import { failureOf, type WorkerMessage, type WorkerOrder, type WorkerTask } from './stageProcess'
import { stageDefinitions } from './stages'
import type { StageHelpers } from './stages/stage'
import { runVerify, type VerifyPayload } from './stages/verify'

const port = parentPort!
let controller = new AbortController()
const send = (message: WorkerMessage) => port.postMessage(message)

async function run({ stage, payload, workDir }: WorkerTask): Promise<void> {
  controller = new AbortController()
  const helpers: StageHelpers = {
    signal: controller.signal,
    workDir,
    progress: progress => send({ kind: 'progress', progress }),
    log: line => send({ kind: 'log', line }),
  }
  try {
    const result = stage === 'verify' ? await runVerify(payload as VerifyPayload, helpers) : await stageDefinitions[stage].run(payload, helpers)
    send({ kind: 'result', result })
  } catch (error) {
    send({ kind: 'failure', failure: failureOf(error) })
  }
}

port.on('message', (order: WorkerOrder) => {
  if (order.kind === 'abort') controller.abort()
  else void run(order.task)
})
