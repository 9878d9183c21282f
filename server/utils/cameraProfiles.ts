import { randomUUID } from 'node:crypto'
import { desc, eq } from 'drizzle-orm'
import type { z } from 'zod'
import { LampsumError } from '#shared/errors'
import type { CameraProfile, cameraProfileWriteSchema } from '#shared/schemas/campaigns'
import type { Database } from '../db/client'
import { cameraProfiles } from '../db/schema'
import { writeAudit } from './audit'
import { afterPosition, decodeCursor, pageOf, type ListPage, type ListQuery } from './lists'

type ProfileValues = z.output<typeof cameraProfileWriteSchema>

export async function listCameraProfiles(database: Database, { limit, cursor }: ListQuery): Promise<ListPage<CameraProfile>> {
  const rows = await database.select().from(cameraProfiles).where(afterPosition(cameraProfiles.createdAt, cameraProfiles.id, decodeCursor(cursor)))
    .orderBy(desc(cameraProfiles.createdAt), desc(cameraProfiles.id)).limit(limit + 1)
  const page = pageOf(rows, limit)
  return { items: page.rows.map(({ createdAt, ...profile }) => profile), nextCursor: page.nextCursor }
}

const columnsOf = ({ name, transfer, range, ...optional }: ProfileValues) => ({
  name, transfer, range, frameRateHz: optional.frameRateHz ?? null, frameExposureSeconds: optional.frameExposureSeconds ?? null, millimetresPerPixel: optional.millimetresPerPixel ?? null,
})

export async function createCameraProfile(database: Database, userId: string, values: ProfileValues): Promise<string> {
  const id = randomUUID()
  await database.transaction(async (transaction) => {
    await transaction.insert(cameraProfiles).values({ id, ...columnsOf(values), createdAt: new Date() })
    await writeAudit(transaction, { userId, action: 'camera profile added', subject: id, details: columnsOf(values) })
  })
  return id
}

/** Replaces a profile's values. Acquisitions keep the values they were registered with. */
export async function changeCameraProfile(database: Database, userId: string, id: string, values: ProfileValues): Promise<void> {
  await database.transaction(async (transaction) => {
    const [known] = await transaction.select({ id: cameraProfiles.id }).from(cameraProfiles).where(eq(cameraProfiles.id, id)).for('update')
    if (!known) throw new LampsumError('not-found')
    await transaction.update(cameraProfiles).set(columnsOf(values)).where(eq(cameraProfiles.id, id))
    await writeAudit(transaction, { userId, action: 'camera profile changed', subject: id, details: columnsOf(values) })
  })
}
