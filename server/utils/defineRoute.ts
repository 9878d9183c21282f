import type { H3Event } from 'h3'
import type { z } from 'zod'
import { LampsumError } from '#shared/errors'
import { can } from '#shared/permissions'
import { routes, type RouteKey, type RouteSpec } from '#shared/routes'
import type { User } from '#shared/schemas/people'

type Parsed<S> = S extends z.ZodType ? z.output<S> : undefined
type SpecOf<K extends RouteKey> = (typeof routes)[K]
type Answer<K extends RouteKey> = SpecOf<K> extends { response: z.ZodType } ? z.input<SpecOf<K>['response']> : unknown

export interface RouteCall<K extends RouteKey> {
  event: H3Event
  user: SpecOf<K>['permission'] extends 'public' ? User | null : User
  /** The campaign that the route's scope led to; '' when it has none. */
  campaignId: string
  params: Record<string, string>
  query: SpecOf<K> extends { query: infer Q } ? Parsed<Q> : undefined
  body: SpecOf<K> extends { body: infer B } ? Parsed<B> : undefined
}

/**
 * A handler for one entry of the route table: it checks role and campaign, parses query and body by the entry's
 * schemas, and turns every error into the API's form. What is left to write is the call itself.
 */
export function defineRoute<K extends RouteKey>(key: K, handle: (call: RouteCall<K>) => Promise<Answer<K>>) {
  const spec: RouteSpec = routes[key]
  return defineEventHandler(async (event) => {
    try {
      const user = await findUser(event)
      if (spec.permission !== 'public') {
        if (!user) throw new LampsumError('sign-in-needed')
        if (!can(user.role, spec.permission)) throw new LampsumError('not-allowed')
      }
      const params = getRouterParams(event, { decode: true })
      const campaignId = spec.scope === 'none' ? '' : await requireScope(user!, spec.scope, params.id ?? '')
      const query = spec.query ? parseInput(spec.query, getQuery(event)) : undefined
      const body = spec.body ? parseInput(spec.body, (await readJson(event)) ?? {}) : undefined
      const answer = await handle({ event, user, campaignId, params, query, body } as RouteCall<K>)
      if (spec.status) setResponseStatus(event, spec.status)
      return answer
    } catch (error) {
      throw toApiError(error, event)
    }
  })
}

async function readJson(event: H3Event): Promise<unknown> {
  try {
    return await readBody<unknown>(event)
  } catch (error) {
    throw new LampsumError('bad-input', 'The body is not valid JSON. Send JSON with Content-Type: application/json.', { cause: error })
  }
}

/** Parses by a schema; the first problem of each field goes into `fields`. */
export function parseInput<S extends z.ZodType>(schema: S, input: unknown): z.output<S> {
  const result = schema.safeParse(input)
  if (result.success) return result.data
  const fields: Record<string, string> = {}
  for (const issue of result.error.issues) fields[issue.path.join('.') || 'body'] ??= issue.message
  throw new LampsumError('bad-input', undefined, { fields })
}
