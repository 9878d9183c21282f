import { describe, expect, it } from 'vitest'
import { routes } from '#shared/routes'
import { describeApi } from '../../../server/utils/openapi'

interface Operation {
  operationId: string
  security: unknown[]
  parameters?: { name: string, in: string, required: boolean, schema: unknown }[]
  requestBody?: { content: Record<string, { schema: Record<string, unknown> }> }
  responses: Record<string, { description: string, content?: Record<string, { schema: Record<string, unknown> }> }>
}
const api = describeApi('1.2.3')
const paths = api.paths as Record<string, Record<string, Operation>>
const operations = Object.entries(paths).flatMap(([path, methods]) => Object.entries(methods).map(([method, operation]) => ({ path, method, operation })))

// Rules from the OpenAPI Specification 3.1.0, sections 4.8.8–4.8.17.
describe('the OpenAPI page', () => {
  it('is version 3.1 with one operation for each entry of the route table', () => {
    expect(api.openapi).toMatch(/^3\.1\.\d$/)
    const described = operations.map(({ path, method }) => `${method.toUpperCase()} ${path.replaceAll(/\{(\w+)\}/g, ':$1')}`)
    expect(described.sort()).toEqual(Object.keys(routes).sort())
  })

  it('gives every operation an id of its own', () => {
    const ids = operations.map(({ operation }) => operation.operationId)
    expect(new Set(ids).size).toBe(ids.length)
  })

  it('declares each parameter of a path, as required, and no other', () => {
    for (const { path, operation } of operations) {
      const inPath = [...path.matchAll(/\{(\w+)\}/g)].map(match => match[1])
      const declared = (operation.parameters ?? []).filter(parameter => parameter.in === 'path')
      expect(declared.map(parameter => parameter.name)).toEqual(inPath)
      expect(declared.every(parameter => parameter.required)).toBe(true)
    }
  })

  it('describes bodies as they come in: the e-mail before trimming is a string, fields with defaults are optional', () => {
    const signIn = paths['/api/auth/sign-in']!.post!.requestBody!.content['application/json']!.schema
    expect(signIn).toMatchObject({ type: 'object', required: ['email', 'password'] })
    const limit = paths['/api/people']!.get!.parameters!.find(parameter => parameter.name === 'limit')!
    expect(limit.required).toBe(false)
    expect(limit.schema).toMatchObject({ minimum: 1, maximum: 200, default: 50 })
  })

  it('names success and refusal of every operation, and what is open to all', () => {
    for (const { operation } of operations) {
      expect(Object.keys(operation.responses).some(status => /^2\d\d$/.test(status))).toBe(true)
      expect(operation.responses.default!.content!['application/json']!.schema.$ref).toBe('#/components/schemas/Error')
    }
    expect(paths['/api/health']!.get!.security).toEqual([])
    expect(paths['/api/people']!.get!.security).toEqual([{ cookie: [] }, { token: [] }])
  })

  it('leaves no reference without a target', () => {
    const text = JSON.stringify(api)
    const references = new Set([...text.matchAll(/"\$ref":"([^"]+)"/g)].map(match => match[1]!))
    expect([...references].filter(reference => reference.startsWith('#/components/'))).toEqual(['#/components/schemas/Error'])
    // References inside one schema would point to the root of the whole page instead.
    expect([...references].filter(reference => !reference.startsWith('#/components/'))).toEqual([])
  })
})
