/** Worker thread: runs one stage. Pixels are touched here and in ffmpeg, so the runner's heartbeat never stalls. */
import { parentPort, workerData } from 'node:worker_threads'
import { failureOf, type WorkerMessage, type WorkerTask } from './stageProcess'
import { stageDefinitions } from './stages'
import { runVerify, type VerifyPayload } from './stages/verify'

const port = parentPort!
const { stage, payload, workDir } = workerData as WorkerTask
const controller = new AbortController()
const send = (message: WorkerMessage) => port.postMessage(message)
const helpers = {
  signal: controller.signal,
  workDir,
  progress: (progress: Extract<WorkerMessage, { kind: 'progress' }>['progress']) => send({ kind: 'progress', progress }),
  log: (line: string) => send({ kind: 'log', line }),
}

port.on('message', (message) => {
  if (message === 'abort') controller.abort()
})

try {
  const result = stage === 'verify' ? await runVerify(payload as VerifyPayload, helpers) : await stageDefinitions[stage].run(payload, helpers)
  send({ kind: 'result', result })
} catch (error) {
  send({ kind: 'failure', failure: failureOf(error) })
} finally {
  port.close()
}
