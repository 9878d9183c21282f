import { can } from '#shared/permissions'
import type { User } from '#shared/schemas/people'
import type { Home, HomeItem } from '#shared/schemas/results'
import type { Database } from '../db/client'
import { diskItems, draftItems, processingItems, releaseItems, stateItems, uploadItems } from './homeItems'

const most = 40
const mostOfAKind = 12
/** What only a person can solve comes first. */
const urgency: HomeItem['kind'][] = ['disk', 'failed', 'review', 'upload', 'record missing', 'release', 'ready', 'processing']

/** What needs the caller now, by role, as sentences with where to go. `counts` counts what was left out, too. */
export async function readHome(database: Database, user: User, freeBytes: () => Promise<number>, now = new Date()): Promise<Home> {
  const found = (await Promise.all(user.role === 'guest'
    ? [releaseItems(database, user, now)]
    : [
        stateItems(database, user),
        can(user.role, 'upload.write') ? uploadItems(database, user, now) : [],
        can(user.role, 'job.control') ? diskItems(freeBytes) : [],
        can(user.role, 'frameSet.release') ? draftItems(database) : [],
        processingItems(database),
      ])).flat()
  const items = urgency.flatMap(kind => found.filter(item => item.kind === kind).slice(0, mostOfAKind)).slice(0, most)
  const counts: Record<string, number> = {}
  for (const { kind } of found) counts[kind] = (counts[kind] ?? 0) + 1
  return { items, counts }
}
