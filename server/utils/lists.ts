import { and, eq, lt, or, type SQL } from 'drizzle-orm'
import type { MySqlColumn } from 'drizzle-orm/mysql-core'
import { LampsumError } from '#shared/errors'

export interface ListQuery {
  limit: number
  cursor?: string
}

export interface ListPage<T> {
  items: T[]
  nextCursor: string | null
}

/** Where a page of a list ended: lists run from the newest row to the oldest, by time and then by id. */
export interface ListPosition {
  createdAt: Date
  id: string
}

export const encodeCursor = ({ createdAt, id }: ListPosition) => Buffer.from(`${createdAt.getTime()}.${id}`).toString('base64url')

/** @throws LampsumError for a cursor that no list has given out */
export function decodeCursor(cursor: string | undefined): ListPosition | null {
  if (!cursor) return null
  const match = /^(\d{1,15})\.([\w-]{1,64})$/.exec(Buffer.from(cursor, 'base64url').toString())
  if (!match) throw new LampsumError('bad-input', undefined, { fields: { cursor: 'Use the nextCursor of the page before.' } })
  return { createdAt: new Date(Number(match[1])), id: match[2]! }
}

/** The rows that come after a position. Rows added meanwhile are newer, so they neither shift nor double a page. */
export function afterPosition(createdAt: MySqlColumn, id: MySqlColumn, position: ListPosition | null): SQL | undefined {
  return position ? or(lt(createdAt, position.createdAt), and(eq(createdAt, position.createdAt), lt(id, position.id))) : undefined
}

/** Cuts `limit + 1` rows, as asked from the database, into a page. */
export function pageOf<R extends ListPosition>(rows: R[], limit: number): { rows: R[], nextCursor: string | null } {
  const page = rows.slice(0, limit)
  return { rows: page, nextCursor: rows.length > limit ? encodeCursor(page.at(-1)!) : null }
}

/** A pattern that finds `text` anywhere, taken literally. */
export const containing = (text: string) => `%${text.replaceAll(/[\\%_]/g, character => `\\${character}`)}%`
