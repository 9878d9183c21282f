import { mkdir, rm } from 'node:fs/promises'
import { join } from 'node:path'
import { and, eq } from 'drizzle-orm'
import type { Database, Transaction } from '../server/db/client'
import { isDatabaseAway } from '../server/db/retry'
import { stageOutputs } from '../server/db/schema'
import type { FileStore } from '../server/store/fileStore'
import type { PipelineStage } from '../shared/states'
import { advanceWithin } from './queue/advance'
import { inputsKey, keyOf, loadSituation } from './queue/inputs'
import { heartbeatSeconds, type Claim, type Outcome, type Progress, type Queue } from './queue/queue'
import { failureOf, prepareWorker, runInWorker, type Failure, type StageRun } from './stageProcess'
import { stageDefinitions } from './stages'
import type { StageResult } from './stages/stage'
import { loadVerify, publishRefused, publishVerified, storeVerified } from './stages/verify'

export interface AttemptContext {
  database: Database
  queue: Queue
  store: FileStore
  incoming: string
  /** This runner's own work folder. */
  work: string
  workerEntry: string
}

type Ending = 'cancel' | 'hold' | 'lost' | 'stop'
type Publish = (transaction: Transaction) => Promise<void>
interface Prepared {
  payload: unknown
  /** Called after the files are in the store. */
  publish: (transaction: Transaction, result: StageResult, keys: Record<string, string>) => Promise<void>
}

const logLines = 400

/** One attempt of a job, from claim to settled: load, run in a worker thread, publish and settle in one transaction. */
export class Attempt {
  private ending: Ending | null = null
  private run: StageRun | null = null
  private progress: Progress = { progress: 0 }
  private readonly log: string[] = []

  constructor(private readonly context: AttemptContext, private readonly claim: Claim) {}

  /** Ends it early: because a person asked, the claim was lost, or the runner stops. */
  end(ending: Ending): void {
    this.ending ??= ending
    this.run?.abort()
  }

  async execute(): Promise<void> {
    const workDir = join(this.context.work, `${this.claim.jobId}-${this.claim.attempt}`)
    const beat = setInterval(() => void this.heartbeat(), heartbeatSeconds * 1000)
    try {
      await mkdir(workDir, { recursive: true })
      const prepared = await this.prepare()
      this.run = runInWorker(this.context.workerEntry, { stage: this.claim.stage, payload: prepared.payload, workDir }, progress => this.progress = progress, line => this.note(line))
      // Loads while this stage runs, so that the next one finds it ready.
      prepareWorker(this.context.workerEntry)
      if (this.ending) this.run.abort()
      const result = await this.run.result
      if (this.ending) await this.settleEnding()
      else await this.settleResult(prepared, result)
    } catch (error) {
      if (this.ending) await this.settleEnding()
      else await this.settleFailure(failureOf(error))
    } finally {
      clearInterval(beat)
      await rm(workDir, { recursive: true, force: true })
    }
  }

  private note(line: string): void {
    this.log.push(`${new Date().toISOString()} ${line}`)
    if (this.log.length > logLines) this.log.shift()
  }

  private async heartbeat(): Promise<void> {
    try {
      const answer = await this.context.queue.heartbeat(this.claim, this.progress)
      if (answer !== 'go on') this.end(answer)
    } catch (error) {
      this.note(`The heartbeat failed and is tried again: ${(error as Error).message}`)
    }
  }

  private async prepare(): Promise<Prepared> {
    const { database, store, incoming } = this.context
    if (this.claim.stage === 'verify') {
      const payload = await loadVerify(database, this.claim.uploadId!, incoming, store)
      return { payload, publish: async (transaction, result) => publishVerified(transaction, payload, result.facts.sha256 as string) }
    }
    const stage = this.claim.stage
    const situation = await loadSituation(database, this.claim.acquisitionId)
    const key = inputsKey(situation, stage)
    const definition = stageDefinitions[stage]
    const payload = await definition.load(situation, store)
    return {
      payload,
      publish: async (transaction, result, keys) => {
        // A copy: the stage may take files out, and the transaction may be tried again.
        const own = { ...keys }
        await definition.publish?.(transaction, { situation, payload, result, keys: own, jobId: this.claim.jobId })
        await writeOutput(transaction, stage, this.claim, key, result, own)
        await advanceWithin(transaction, this.claim.acquisitionId)
      },
    }
  }

  private async settleResult(prepared: Prepared, result: StageResult): Promise<void> {
    const { store, incoming } = this.context
    const folder = `results/${this.claim.acquisitionId}/${this.claim.stage}/${this.claim.jobId}-${this.claim.attempt}`
    const keys: Record<string, string> = {}
    if (this.claim.stage === 'verify') await storeVerified(prepared.payload as Parameters<typeof storeVerified>[0], incoming, store)
    for (const name of Object.keys(result.files)) keys[name] = `${folder}/${name}`
    await store.putAll(Object.entries(result.files).map(([name, localPath]) => ({ key: keys[name]!, localPath })))
    const replaced = this.claim.stage === 'verify' ? [] : await this.outputFiles(this.claim.stage)
    const settled = await this.settle({ state: result.state, message: result.message }, transaction => prepared.publish(transaction, result, keys))
    // Intermediate files of the output that this one replaced; frame set files have rows of their own and stay.
    const useless = settled ? (this.claim.stage === 'check' ? [] : replaced) : Object.values(keys)
    for (const key of useless) await store.remove(key)
  }

  private async outputFiles(stage: PipelineStage): Promise<string[]> {
    const [output] = await this.context.database.select({ files: stageOutputs.files }).from(stageOutputs).where(and(eq(stageOutputs.acquisitionId, this.claim.acquisitionId), eq(stageOutputs.stage, stage)))
    return Object.values(output?.files ?? {})
  }

  private async settleFailure(failure: Failure): Promise<void> {
    this.note(failure.detail)
    const state = failure.code === 'disk-full' ? 'on hold' : failure.review ? 'needs review' : 'failed'
    const refuse: Publish | undefined = this.claim.stage === 'verify' && state === 'failed' ? transaction => publishRefused(transaction, this.claim.uploadId!, failure.message) : undefined
    await this.settle({ state, message: failure.message, errorCode: failure.code }, refuse)
  }

  private async settleEnding(): Promise<void> {
    const outcomes: Record<Exclude<Ending, 'lost'>, Outcome> = {
      cancel: { state: 'cancelled', message: 'Cancelled. Retry runs it again.' },
      hold: { state: 'on hold', message: 'Put on hold. Resume lets it go on.' },
      stop: { state: 'waiting', message: 'Its runner was stopped. It starts again by itself.' },
    }
    if (this.ending && this.ending !== 'lost') await this.settle(outcomes[this.ending])
  }

  /** Tries until the database answers: a result must not be lost because it was away for a moment. */
  private async settle(outcome: Outcome, publish?: Publish): Promise<boolean> {
    for (let pause = 200; ; pause = Math.min(pause * 2, 5000)) {
      try {
        return await this.context.queue.settle(this.claim, { ...outcome, log: this.log.join('\n') }, publish)
      } catch (error) {
        if (this.ending === 'lost' || !isDatabaseAway(error)) throw error
        await new Promise(resolve => setTimeout(resolve, pause))
      }
    }
  }
}

async function writeOutput(transaction: Transaction, stage: PipelineStage, claim: Claim, key: string | null, result: StageResult, keys: Record<string, string>): Promise<void> {
  const output = {
    jobId: claim.jobId,
    // A result that a person still has to look at is kept to be shown, but counts as no output.
    inputsKey: result.state === 'done' && key ? key : '',
    outputKey: keyOf([key, result.facts]),
    facts: result.facts, files: keys, flags: result.flags, createdAt: new Date(),
  }
  await transaction.insert(stageOutputs).values({ acquisitionId: claim.acquisitionId, stage, ...output }).onDuplicateKeyUpdate({ set: output })
}
