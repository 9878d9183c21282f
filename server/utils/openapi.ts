import { z } from 'zod'
import { routes, type RouteSpec } from '#shared/routes'

type Schema = Record<string, unknown>

const errorRef = { description: 'Refused; data.code says why and data.message what to do', content: { 'application/json': { schema: { $ref: '#/components/schemas/Error' } } } }
const bodyOf = (schema: Schema, type = 'application/json') => ({ content: { [type]: { schema } } })

/** OpenAPI 3.1, made from the table and the schemas that the server itself checks requests with. */
export function describeApi(version: string) {
  const paths: Record<string, Record<string, unknown>> = {}
  for (const [key, spec] of Object.entries(routes) as [string, RouteSpec][]) {
    const [method, path] = key.split(' ') as [string, string]
    const template = path.replaceAll(/:(\w+)/g, '{$1}')
    ;(paths[template] ??= {})[method.toLowerCase()] = describeRoute(method, path, spec)
  }
  return {
    openapi: '3.1.0',
    info: { title: 'Lampsum', version, description: 'Every route accepts the session cookie or `Authorization: Bearer <token>`. Lists take `limit` and `cursor` and answer `{ items, nextCursor }`.' },
    paths,
    components: {
      securitySchemes: { cookie: { type: 'apiKey', in: 'cookie', name: 'lampsum' }, token: { type: 'http', scheme: 'bearer' } },
      schemas: { Error: errorSchema },
    },
  }
}

function describeRoute(method: string, path: string, spec: RouteSpec): Schema {
  const open = spec.permission === 'public'
  const parameters = [...pathParameters(path), ...(spec.query ? queryParameters(toSchema(spec.query, 'input')) : [])]
  return {
    operationId: operationId(method, path),
    summary: spec.summary,
    tags: [path.split('/')[2]!],
    security: open ? [] : [{ cookie: [] }, { token: [] }],
    ...(parameters.length ? { parameters } : {}),
    ...(spec.body ? { requestBody: { required: true, ...bodyOf(toSchema(spec.body, 'input')) } } : {}),
    ...(spec.raw && ['POST', 'PATCH'].includes(method) ? { requestBody: bodyOf({}, spec.raw) } : {}),
    responses: { [spec.status ?? 200]: describeAnswer(method, spec), default: errorRef },
  }
}

function describeAnswer(method: string, spec: RouteSpec): Schema {
  const description = spec.summary
  if (spec.response) return { description, ...bodyOf(toSchema(spec.response, 'output')) }
  return spec.raw && method === 'GET' ? { description, ...bodyOf({}, spec.raw) } : { description }
}

const pathParameters = (path: string) => [...path.matchAll(/:(\w+)/g)].map(match => ({ name: match[1]!, in: 'path', required: true, schema: { type: 'string' } }))

function queryParameters(schema: Schema) {
  const required = (schema.required ?? []) as string[]
  return Object.entries((schema.properties ?? {}) as Record<string, Schema>).map(([name, property]) => ({ name, in: 'query', required: required.includes(name), schema: property }))
}

/** "GET /api/frame-sets/:id" becomes getFrameSetsById. */
function operationId(method: string, path: string): string {
  const words = path.replace('/api/', '').replaceAll(/:(\w)/g, 'by-$1').split(/[^a-z]+/i).filter(Boolean)
  return method.toLowerCase() + words.map(word => word[0]!.toUpperCase() + word.slice(1)).join('')
}

function toSchema(schema: z.ZodType, io: 'input' | 'output'): Schema {
  // OpenAPI 3.1 speaks JSON Schema 2020-12, zod's default; the dialect need not be repeated in every schema.
  const { $schema, ...rest } = z.toJSONSchema(schema, { io, unrepresentable: 'any' }) as Schema
  return rest
}

const errorSchema = {
  type: 'object',
  required: ['statusCode', 'statusMessage', 'data'],
  properties: {
    statusCode: { type: 'integer' },
    statusMessage: { type: 'string' },
    data: {
      type: 'object',
      required: ['code', 'message'],
      properties: { code: { type: 'string' }, message: { type: 'string' }, fields: { type: 'object', additionalProperties: { type: 'string' } } },
    },
  },
}
