import { z } from 'zod'

export const idSchema = z.string().min(1).max(64)
export const idParamsSchema = z.object({ id: idSchema })
export const timeSchema = z.iso.datetime()

export const listQuerySchema = z.object({
  limit: z.coerce.number().int().min(1).max(200).default(50),
  cursor: z.string().max(200).optional(),
})

/** A list answers `{ items, nextCursor }`. */
export const listOf = <T extends z.ZodType>(item: T) => z.object({ items: z.array(item), nextCursor: z.string().nullable() })

export const okSchema = z.object({ ok: z.literal(true) })
export const createdSchema = z.object({ id: idSchema })

/** Trimmed text that must not be empty. */
export const nameSchema = (max: number, what: string) => z.string().trim().min(1, `Give ${what}.`).max(max, `Use at most ${max} characters.`)
/** Optional text; an empty string counts as none. */
export const optionalText = (max: number) => z.string().trim().max(max, `Use at most ${max} characters.`).nullish().transform(value => value || null)
