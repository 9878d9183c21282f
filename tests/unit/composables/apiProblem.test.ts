import { describe, expect, it } from 'vitest'
import { ApiProblem, toProblem } from '../../../composables/apiProblem'

describe('failed calls', () => {
  it('uses the API\'s own sentence and fields', () => {
    const problem = toProblem({ statusCode: 400, data: { statusCode: 400, data: { code: 'bad-input', message: 'Some values do not fit.', fields: { title: 'Give a title.' } } } })
    expect(problem).toMatchObject({ code: 'bad-input', message: 'Some values do not fit.', status: 400, fields: { title: 'Give a title.' } })
  })
  it('has a sentence of its own for answers that are not the API\'s', () => {
    expect(toProblem({ statusCode: 502, data: '<html>' })).toMatchObject({ code: 'server-error', status: 502 })
    expect(toProblem({ status: 404, data: { data: { code: 'made-up', message: 'x' } } })).toMatchObject({ code: 'not-found' })
  })
  it('tells a dead network from a refusal', () => {
    expect(toProblem(new TypeError('fetch failed'))).toMatchObject({ code: 'unreachable', status: 0 })
  })
  it('leaves a known problem as it is', () => {
    const known = new ApiProblem('not-found', 'x', 404)
    expect(toProblem(known)).toBe(known)
  })
})
