import { describe, expect, it } from 'vitest'
import { addNonce, contentSecurityPolicy, isKnownRoute, refuseCrossSite } from '../../../server/utils/security'
import { findConfigProblem } from '../../../server/utils/config'

const publicUrl = 'https://lampsum.lab.example'
const send = (headers: { method?: string, fetchSite?: string, origin?: string, host?: string }) => () => refuseCrossSite({ method: 'POST', host: '10.0.0.5:3000', publicUrl, ...headers })
const refusal = expect.objectContaining({ code: 'cross-site' })

describe('requests from another site', () => {
  it.each(['cross-site', 'same-site'])('are refused when the browser says %s', (fetchSite) => {
    expect(send({ fetchSite })).toThrow(refusal)
    expect(send({ fetchSite, method: 'DELETE', origin: publicUrl })).toThrow(refusal)
  })

  it('are refused by a foreign or opaque origin when the browser does not say', () => {
    for (const origin of ['https://evil.example', 'null', 'https://lampsum.lab.example.evil.example', 'https://lampsum.lab.example:8443']) expect(send({ origin })).toThrow(refusal)
  })

  it('are told from our own pages, under the public address and the one the request came to', () => {
    for (const headers of [{ fetchSite: 'same-origin', origin: publicUrl }, { fetchSite: 'none' }, { origin: publicUrl }, { origin: 'http://10.0.0.5:3000' }]) expect(send(headers)).not.toThrow()
  })

  it('are told from scripts, which send neither header, and from reading', () => {
    expect(send({})).not.toThrow()
    for (const method of ['GET', 'HEAD', 'OPTIONS']) expect(send({ method, fetchSite: 'cross-site', origin: 'https://evil.example' })).not.toThrow()
  })
})

describe('known routes', () => {
  it('match by method and whole path', () => {
    expect(isKnownRoute('GET', '/api/frame-sets/abc/files/frameset.npz')).toBe(true)
    expect(isKnownRoute('GET', '/api/openapi.json')).toBe(true)
    expect(isKnownRoute('GET', '/api/openapiXjson')).toBe(false)
    expect(isKnownRoute('PUT', '/api/health')).toBe(false)
    expect(isKnownRoute('GET', '/api/_auth/session')).toBe(false)
    expect(isKnownRoute('GET', '/api/people/a/b')).toBe(false)
  })
})

describe('content policy', () => {
  it('lets only own scripts and those with the nonce run, and nobody frame the pages', () => {
    const policy = contentSecurityPolicy({ nonce: 'abc', dev: false, https: true })
    const scripts = policy.split('; ').find(part => part.startsWith('script-src'))
    expect(scripts).toBe('script-src \'self\' \'nonce-abc\'')
    expect(policy).toContain('frame-ancestors \'none\'')
  })

  it('marks every script once and leaves other text alone', () => {
    expect(addNonce('<script>a</script><script type="module" src="/x.js"></script><scripted>', 'n')).toBe('<script nonce="n">a</script><script nonce="n" type="module" src="/x.js"></script><scripted>')
    expect(addNonce('<script id="a" nonce="n">', 'n')).toBe('<script id="a" nonce="n">')
  })
})

describe('configuration', () => {
  const good = { databaseUrl: 'mysql://lampsum@localhost/lampsum', dataDir: '/var/lib/lampsum', publicUrl, session: { password: 'x'.repeat(32) } }

  it('is accepted when complete', () => expect(findConfigProblem(good)).toBeNull())

  it.each([
    ['NUXT_SESSION_PASSWORD', { ...good, session: { password: 'x'.repeat(31) } }],
    ['NUXT_DATABASE_URL', { ...good, databaseUrl: '' }],
    ['NUXT_DATA_DIR', { ...good, dataDir: '' }],
    ['NUXT_PUBLIC_URL', { ...good, publicUrl: 'lampsum' }],
  ])('names %s when that is missing or no good, and what to do', (name, config) => {
    expect(findConfigProblem(config)).toMatch(new RegExp(`^${name} is .*\\.$`))
  })
})
