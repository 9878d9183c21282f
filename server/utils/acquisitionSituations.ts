import { and, desc, eq, getTableColumns, inArray, ne } from 'drizzle-orm'
import { isCurrent, type Situation, type UploadRow } from '../../jobs/queue/inputs'
import { pipelineStages } from '#shared/states'
import type { Database } from '../db/client'
import { alignments, cutLists, jobs, stageOutputs, uploads, type acquisitions } from '../db/schema'
import { deriveAcquisitionState, type DerivedState, type JobFacts } from './acquisitionState'

type AcquisitionRow = typeof acquisitions.$inferSelect
type JobRow = typeof jobs.$inferSelect

export interface AcquisitionSituation {
  situation: Situation
  /** All but removed ones, newest first. */
  uploads: UploadRow[]
  /** Newest job by upload. */
  proofs: Map<string, JobRow>
}

/** What decides the state of many acquisitions, in five queries. Logs and groups, which are large, are left out. */
export async function loadSituations(database: Database, rows: AcquisitionRow[]): Promise<Map<string, AcquisitionSituation>> {
  const ids = rows.map(row => row.id)
  if (!ids.length) return new Map()
  const { log, ...jobColumns } = getTableColumns(jobs)
  const { groups, ...cutListColumns } = getTableColumns(cutLists)
  const [uploadRows, outputRows, jobRows, alignmentRows, cutListRows] = await Promise.all([
    database.select().from(uploads).where(and(inArray(uploads.acquisitionId, ids), ne(uploads.state, 'removed'))).orderBy(desc(uploads.createdAt), desc(uploads.id)),
    database.select().from(stageOutputs).where(inArray(stageOutputs.acquisitionId, ids)),
    database.select(jobColumns).from(jobs).where(inArray(jobs.acquisitionId, ids)).orderBy(desc(jobs.createdAt), desc(jobs.id)),
    database.select().from(alignments).where(and(inArray(alignments.acquisitionId, ids), eq(alignments.method, 'manual'), eq(alignments.accepted, true))).orderBy(desc(alignments.version)),
    database.select(cutListColumns).from(cutLists).where(inArray(cutLists.acquisitionId, ids)).orderBy(desc(cutLists.version)),
  ])
  const uploadsOf = groupByAcquisition(uploadRows)
  const outputsOf = groupByAcquisition(outputRows)
  const jobsOf = groupByAcquisition(jobRows.map((row): JobRow => ({ ...row, log: null })))
  const alignmentsOf = groupByAcquisition(alignmentRows)
  const cutListsOf = groupByAcquisition(cutListRows.map(row => ({ ...row, groups: [] })))
  return new Map(rows.map((acquisition) => {
    const { latest, proofs } = newestJobs(jobsOf.get(acquisition.id) ?? [])
    const ownUploads = uploadsOf.get(acquisition.id) ?? []
    const stored = ownUploads.filter(upload => upload.state === 'stored').sort((a, b) => Number(b.storedAt) - Number(a.storedAt) || (a.id < b.id ? 1 : -1))
    const cutList = cutListsOf.get(acquisition.id)?.[0] ?? null
    const situation: Situation = {
      acquisition,
      clip: stored.find(upload => upload.kind === 'clip') ?? null,
      record: stored.find(upload => upload.kind === 'record') ?? null,
      outputs: Object.fromEntries((outputsOf.get(acquisition.id) ?? []).map(output => [output.stage, output])),
      latestJobs: latest,
      manualAlignment: alignmentsOf.get(acquisition.id)?.[0] ?? null,
      manualCutList: cutList?.authorId ? cutList : null,
      frameSets: [],
    }
    return [acquisition.id, { situation, uploads: ownUploads, proofs }]
  }))
}

function groupByAcquisition<R extends { acquisitionId: string }>(rows: R[]): Map<string, R[]> {
  const groups = new Map<string, R[]>()
  for (const row of rows) {
    const group = groups.get(row.acquisitionId)
    if (group) group.push(row)
    else groups.set(row.acquisitionId, [row])
  }
  return groups
}

function newestJobs(rows: JobRow[]) {
  const latest: Situation['latestJobs'] = {}
  const proofs = new Map<string, JobRow>()
  for (const job of rows) {
    if (job.stage !== 'verify') latest[job.stage] ??= job
    else if (job.uploadId && !proofs.has(job.uploadId)) proofs.set(job.uploadId, job)
  }
  return { latest, proofs }
}

const factsOfJob = ({ stage, state, message, progress }: JobRow): JobFacts => ({ stage, state, message, progress })

export function stateOf({ situation, uploads: ownUploads, proofs }: AcquisitionSituation, frameSetCount: number): DerivedState {
  return deriveAcquisitionState({
    uploads: ownUploads,
    stages: pipelineStages.map((stage) => {
      const job = situation.latestJobs[stage]
      return { stage, current: isCurrent(situation, stage), job: job ? factsOfJob(job) : null }
    }),
    proofs: ownUploads.filter(upload => upload.state === 'verifying').flatMap(upload => proofs.get(upload.id) ?? []).map(factsOfJob),
    startsByItself: situation.acquisition.autoRun || situation.acquisition.runRequestedAt !== null,
    frameSetCount,
  })
}
