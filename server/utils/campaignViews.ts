import { and, desc, eq, inArray, isNull, or } from 'drizzle-orm'
import type { Campaign } from '#shared/schemas/campaigns'
import type { FactsOf } from '#shared/stageOutputs'
import type { Database } from '../db/client'
import { acquisitions, frameSets } from '../db/schema'
import { loadSituations, stateOf, type AcquisitionSituation } from './acquisitionSituations'
import type { CampaignRow } from './campaigns'
import { countRepetitions, coverageOf, type CoverageAcquisition } from './coverage'

const statesThatNeedAnEye = ['needs review', 'failed']

/** Campaigns with their coverage, and how many of their acquisitions need somebody. */
export async function describeForStaff(database: Database, rows: CampaignRow[]): Promise<Campaign[]> {
  if (!rows.length) return []
  const owned = await database.select().from(acquisitions).where(inArray(acquisitions.campaignId, rows.map(row => row.id)))
  const situations = await loadSituations(database, owned)
  const sets = await selectSets(database, rows, false)
  return rows.map((row) => {
    const own = owned.filter(acquisition => acquisition.campaignId === row.id)
    const ownSets = sets.filter(set => set.campaignId === row.id)
    const states = own.map(({ id }) => stateOf(situations.get(id)!, ownSets.filter(set => set.acquisitionId === id).length).state)
    return {
      ...textOf(row), notes: row.notes,
      acquisitionCount: own.length, frameSetCount: ownSets.length, needsEyeCount: states.filter(state => statesThatNeedAnEye.includes(state)).length,
      coverage: coverageOf(own.map(({ id }) => coverageFacts(situations.get(id)!)), ownSets),
    }
  })
}

/** A guest learns of nothing but what was released. */
export async function describeForGuest(database: Database, rows: CampaignRow[]): Promise<Campaign[]> {
  if (!rows.length) return []
  const sets = await selectSets(database, rows, true)
  return rows.map((row) => {
    const own = sets.filter(set => set.campaignId === row.id)
    return {
      ...textOf(row), notes: null,
      acquisitionCount: new Set(own.map(set => set.acquisitionId)).size, frameSetCount: own.length, needsEyeCount: 0,
      coverage: coverageOf([], own).map(line => ({ ...line, acquisitionId: null })),
    }
  })
}

const textOf = ({ id, name, specimen, createdAt, updatedAt, createdByName }: CampaignRow) => ({ id, name, specimen, createdAt: createdAt.toISOString(), updatedAt: updatedAt.toISOString(), createdByName })

/** Sets in force, and those that were released before a newer run; of the same line only the newest counts repetitions. */
async function selectSets(database: Database, rows: CampaignRow[], releasedOnly: boolean) {
  const found = await database.select({ campaignId: acquisitions.campaignId, acquisitionId: frameSets.acquisitionId, line: frameSets.line, frequencyHz: frameSets.frequencyHz, state: frameSets.state, groups: frameSets.groups })
    .from(frameSets).innerJoin(acquisitions, eq(acquisitions.id, frameSets.acquisitionId))
    .where(and(inArray(acquisitions.campaignId, rows.map(row => row.id)), releasedOnly ? eq(frameSets.state, 'released') : or(isNull(frameSets.supersededAt), eq(frameSets.state, 'released'))))
    .orderBy(desc(frameSets.createdAt), desc(frameSets.id))
  const counted = new Set<string>()
  return found.map(({ groups, state, line, ...set }) => {
    const key = `${set.acquisitionId}:${line}`
    const repetitionsGood = counted.has(key) ? 0 : countRepetitions(groups).repetitionsGood
    counted.add(key)
    return { ...set, released: state === 'released', repetitionsGood }
  })
}

function coverageFacts({ situation }: AcquisitionSituation): CoverageAcquisition {
  const { acquisition, clip, outputs } = situation
  const cut = outputs.cut?.inputsKey ? outputs.cut.facts as unknown as FactsOf<'cut'> : null
  return { id: acquisition.id, plan: acquisition.plan, hasClip: clip !== null, linesFoundHz: cut ? cut.lines.map(line => line.frequencyHz) : null }
}
