import { readdirSync, readFileSync } from 'node:fs'
import { join } from 'node:path'
import { fileURLToPath } from 'node:url'
import { describe, expect, it } from 'vitest'
import { can, roles, type Role } from '#shared/permissions'
import { routes, type RouteSpec } from '#shared/routes'

const table = Object.entries(routes) as [string, RouteSpec][]
const apiFolder = fileURLToPath(new URL('../../../server/api', import.meta.url))
const methods = ['get', 'head', 'options', 'post', 'put', 'patch', 'delete']

interface RouteFile { file: string, key: string, source: string }

/** Nuxt's convention: the path is the route, `[x]` a parameter, the last suffix the method. */
function readRouteFiles(): RouteFile[] {
  const files = (readdirSync(apiFolder, { recursive: true }) as string[]).filter(name => name.endsWith('.ts'))
  return files.map((file) => {
    const parts = file.slice(0, -3).split('.')
    const method = methods.includes(parts.at(-1)!) ? parts.pop()!.toUpperCase() : 'ANY'
    const path = `/${parts.join('.')}`.replace(/\/index$/, '').replaceAll(/\[(\w+)\]/g, ':$1')
    return { file, key: `${method} /api${path}`, source: readFileSync(join(apiFolder, file), 'utf8') }
  })
}

const allowed = (role: Role) => table.filter(([, spec]) => spec.permission !== 'public' && can(role, spec.permission)).map(([key]) => key)
const allows = (role: Role, key: keyof typeof routes) => allowed(role).includes(key)

describe('the route table and the files of server/api', () => {
  const files = readRouteFiles()
  const pathOf = (key: string) => key.split(' ')[1]

  it('has an entry for every file', () => {
    const unknown = files.filter(({ key }) => !table.some(([entry]) => entry === key || (key.startsWith('ANY ') && pathOf(entry) === pathOf(key))))
    expect(unknown.map(({ file }) => file)).toEqual([])
  })

  it('has a file for every entry', () => {
    const missing = table.filter(([entry]) => !files.some(({ key }) => key === entry || (key.startsWith('ANY ') && pathOf(entry) === pathOf(key))))
    expect(missing.map(([entry]) => entry)).toEqual([])
  })

  it('is what each file names in defineRoute, so that no file runs under another entry’s permission', () => {
    const wrong = files.filter(({ key, source }) => !key.startsWith('ANY ') && /define(?:Tus)?Route\(\s*'([^']+)'/.exec(source)?.[1] !== key)
    expect(wrong.map(({ file }) => file)).toEqual([])
  })
})

describe('who may call what', () => {
  it('lets an admin call everything', () => {
    expect(allowed('admin')).toEqual(table.filter(([, spec]) => spec.permission !== 'public').map(([key]) => key))
  })

  it('lets a guest reach campaigns and released frame sets by reading, and otherwise only their own affairs', () => {
    expect(allowed('guest').sort()).toEqual([
      'DELETE /api/tokens/:id',
      'GET /api/auth/me',
      'GET /api/campaigns',
      'GET /api/campaigns/:id',
      'GET /api/events',
      'GET /api/frame-sets',
      'GET /api/frame-sets/:id',
      'GET /api/frame-sets/:id/files/:name',
      'GET /api/frame-sets/:id/images/:name',
      'GET /api/home',
      'GET /api/tokens',
      'HEAD /api/frame-sets/:id/files/:name',
      'POST /api/auth/sign-out',
      'POST /api/tokens',
    ])
  })

  it('keeps people, mails and camera profiles’ values to admins', () => {
    const others = roles.filter(role => role !== 'admin')
    for (const role of others) {
      const reached = allowed(role).filter(key => /\/api\/(?:people|mails)/.test(key) || /^(?:POST|PATCH) \/api\/camera-profiles/.test(key))
      expect(reached, role).toEqual([])
    }
  })

  it.each([
    ['POST /api/frame-sets/:id/release', ['analyst', 'admin']],
    ['POST /api/frame-sets/:id/solve', ['analyst', 'admin']],
    ['PUT /api/acquisitions/:id/cut-list', ['analyst', 'admin']],
    ['PUT /api/acquisitions/:id/alignment', ['analyst', 'admin']],
    ['POST /api/campaigns/:id/guests', ['analyst', 'admin']],
    ['POST /api/campaigns', ['technician', 'analyst', 'admin']],
    ['POST /api/acquisitions', ['technician', 'analyst', 'admin']],
    ['POST /api/uploads', ['technician', 'analyst', 'admin']],
    ['POST /api/acquisitions/:id/process', ['technician', 'analyst', 'operator', 'admin']],
    ['POST /api/jobs/:id/cancel', ['analyst', 'operator', 'admin']],
    ['POST /api/queue/pause', ['analyst', 'operator', 'admin']],
    ['GET /api/jobs', ['technician', 'analyst', 'operator', 'admin']],
  ] as const)('%s is for %s', (key, expected) => {
    expect(roles.filter(role => allows(role, key))).toEqual(expected)
  })

  it('needs no sign-in only for health, the contract, signing in, links and tus discovery', () => {
    expect(table.filter(([, spec]) => spec.permission === 'public').map(([key]) => key).sort()).toEqual([
      'GET /api/auth/link',
      'GET /api/health',
      'GET /api/openapi.json',
      'OPTIONS /api/uploads',
      'OPTIONS /api/uploads/:id',
      'POST /api/auth/accept-link',
      'POST /api/auth/request-reset',
      'POST /api/auth/sign-in',
    ])
  })

  it('checks the campaign wherever an id leads to one', () => {
    const scopes = { 'campaigns': 'campaign', 'acquisitions': 'acquisition', 'records': 'acquisition', 'jobs': 'job', 'frame-sets': 'frameSet' } as Record<string, string>
    for (const [key, spec] of table.filter(([key]) => key.includes('/:id'))) {
      expect(`${key} ${spec.scope}`).toBe(`${key} ${scopes[key.split('/')[2]!] ?? 'none'}`)
    }
  })
})
