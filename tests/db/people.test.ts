import { randomUUID } from 'node:crypto'
import { eq } from 'drizzle-orm'
import { afterAll, beforeAll, describe, expect, it, vi } from 'vitest'
import type { DatabaseHandle } from '../../server/db/client'
import { accountLinks, apiTokens, auditEntries, campaignGuests, frameSets, sessions, users } from '../../server/db/schema'
import { changePerson, invitePerson, listPeople, resendLink } from '../../server/utils/people'
import { ensureAccounts } from '../../server/utils/peopleAccounts'
import { acceptLink, readLink, requestReset } from '../../server/utils/peopleLinks'
import { signIn } from '../../server/utils/peopleSignIn'
import { findOpenCampaign } from '../../server/utils/scope'
import { findLiveCredentials, type Credential } from '../../server/utils/session'
import { forgetOldRows } from '../../server/utils/sessionSweep'
import { createToken, hashSecret, listTokens, newSecret, revokeToken } from '../../server/utils/tokens'
import { insertAcquisition, insertCampaign, insertUser } from '../support/fixtures'
import { openTestDatabase } from '../support/database'
import { publicUrl, startTestMail, stubServerImports } from '../support/people'

let handle: DatabaseHandle
let mail: Awaited<ReturnType<typeof startTestMail>>
let admin: string
const code = (value: string) => expect.objectContaining({ code: value })
const db = () => handle.database

beforeAll(async () => {
  stubServerImports()
  handle = await openTestDatabase()
  mail = await startTestMail()
  admin = await insertUser(db(), 'admin')
  await db().update(users).set({ passwordHash: await hashPassword('the admin’s password') }).where(eq(users.id, admin))
})
afterAll(async () => {
  await mail.stop()
  await handle.close()
  vi.unstubAllGlobals()
})

let address = 0
const tryToSignIn = (email: string, password: string, demo = true) => signIn(db(), { email, password, address: `10.0.0.${address++}` }, { demo })

async function insertSession(userId: string, expiresInMs = 60_000): Promise<Credential> {
  const id = hashSecret(newSecret())
  const now = new Date()
  await db().insert(sessions).values({ id, userId, createdAt: now, lastSeenAt: now, expiresAt: new Date(now.getTime() + expiresInMs) })
  return { kind: 'session', id }
}

const isLive = async (credential: Credential, demo = true) => (await findLiveCredentials(db(), [credential], { demo })).has(credential.id)
const tokenIn = (text: string) => /token=(\S+)/.exec(text)![1]!

async function invite(email = `${randomUUID()}@lab.example`, role: 'analyst' | 'admin' = 'analyst') {
  const id = await invitePerson(db(), admin, { email, name: 'Somebody', role }, publicUrl)
  const [sent] = await mail.mailsTo(email)
  return { id, email, token: tokenIn(sent!.text), sent: sent! }
}

async function makeActive(role: 'analyst' | 'admin' = 'analyst') {
  const person = await invite(undefined, role)
  await acceptLink(db(), { token: person.token, password: 'twelve or more' })
  return person
}

describe('invitations', () => {
  it('send a link to the welcome page; with it the person sets name and password and signs in', async () => {
    const { id, email, token, sent } = await invite()
    expect(sent.text).toContain(`${publicUrl}/welcome?token=`)
    expect(await readLink(db(), token)).toMatchObject({ kind: 'invitation', email })
    await expect(tryToSignIn(email, 'twelve or more')).rejects.toThrow(code('wrong-credentials'))
    await acceptLink(db(), { token, password: 'twelve or more', name: 'Another name' })
    expect(await tryToSignIn(email, 'twelve or more')).toEqual({ id, email, name: 'Another name', role: 'analyst' })
  })

  it('store no token, only its hash', async () => {
    const { id, token } = await invite()
    const rows = await db().select().from(accountLinks).where(eq(accountLinks.userId, id))
    expect(rows.map(row => row.tokenHash)).toEqual([hashSecret(token)])
    expect(JSON.stringify(await db().select().from(auditEntries))).not.toContain(token)
  })

  it('work once, even when two use the link at the same moment', async () => {
    const { token } = await invite()
    const results = await Promise.allSettled([1, 2, 3].map(each => acceptLink(db(), { token, password: `password number ${each}` })))
    expect(results.filter(result => result.status === 'fulfilled')).toHaveLength(1)
    await expect(readLink(db(), token)).rejects.toThrow(code('link-expired'))
  })

  it('run out after seven days', async () => {
    const { token } = await invite()
    const days = (count: number) => new Date(Date.now() + count * 24 * 3600_000)
    await expect(readLink(db(), token, days(6.99))).resolves.toMatchObject({ kind: 'invitation' })
    await expect(readLink(db(), token, days(7.01))).rejects.toThrow(code('link-expired'))
  })

  it('refuse an e-mail that is taken', async () => {
    const { email } = await invite()
    await expect(invitePerson(db(), admin, { email, name: 'Twice', role: 'guest' }, publicUrl)).rejects.toThrow(code('email-taken'))
  })

  it('replace the link before when sent again, and become password links once there is a password', async () => {
    const { id, email, token } = await invite()
    await resendLink(db(), admin, id, publicUrl)
    await expect(readLink(db(), token)).rejects.toThrow(code('link-expired'))
    const second = tokenIn((await mail.mailsTo(email))[0]!.text)
    await acceptLink(db(), { token: second, password: 'twelve or more' })
    await resendLink(db(), admin, id, publicUrl)
    expect((await mail.mailsTo(email))[0]!.text).toContain(`${publicUrl}/new-password?token=`)
  })
})

describe('signing in', () => {
  it('answers alike, and hashes once, for unknown, invited, disabled and wrong', async () => {
    const disabled = await makeActive()
    await changePerson(db(), admin, disabled.id, { disabled: true }, { demo: false })
    const invited = await invite()
    const active = await makeActive()
    const verify = vi.spyOn(globalThis as unknown as { verifyPassword: (hash: string, password: string) => Promise<boolean> }, 'verifyPassword')
    for (const email of ['nobody@lab.example', disabled.email, invited.email, active.email]) {
      verify.mockClear()
      await expect(tryToSignIn(email, email === active.email ? 'not the password' : 'twelve or more')).rejects.toThrow(code('wrong-credentials'))
      expect(verify).toHaveBeenCalledTimes(1)
    }
    verify.mockRestore()
  })

  it('is refused after many attempts from one address, for that e-mail only', async () => {
    const { email } = await makeActive()
    const attempt = (at: string) => signIn(db(), { email, password: 'wrong', address: at }, { demo: true })
    for (let count = 0; count < 8; count++) await expect(attempt('192.0.2.1')).rejects.toThrow(code('wrong-credentials'))
    await expect(attempt('192.0.2.1')).rejects.toThrow(code('too-many-attempts'))
    await expect(attempt('192.0.2.2')).rejects.toThrow(code('wrong-credentials'))
  })
})

describe('password resets', () => {
  it('send a link that works for an hour, ends every session and leaves the name alone', async () => {
    const { id, email } = await makeActive()
    const session = await insertSession(id)
    await requestReset(db(), { email, address: '10.1.1.1' }, { publicUrl, demo: false })
    await vi.waitFor(async () => expect(await mail.mailsTo(email)).toHaveLength(2))
    const token = tokenIn((await mail.mailsTo(email))[0]!.text)
    await expect(readLink(db(), token, new Date(Date.now() + 61 * 60_000))).rejects.toThrow(code('link-expired'))
    await acceptLink(db(), { token, password: 'a new password', name: 'Not by a reset' })
    expect(await isLive(session)).toBe(false)
    await expect(tryToSignIn(email, 'twelve or more')).rejects.toThrow(code('wrong-credentials'))
    expect(await tryToSignIn(email, 'a new password')).toMatchObject({ name: 'Somebody' })
  })

  it('answer the same for an unknown e-mail and send nothing', async () => {
    await expect(requestReset(db(), { email: 'nobody@lab.example', address: '10.1.1.1' }, { publicUrl, demo: false })).resolves.toBeUndefined()
    expect(await mail.mailsTo('nobody@lab.example')).toEqual([])
  })
})

describe('changing people', () => {
  it('gives a new role to sessions that are open', async () => {
    const { id } = await makeActive()
    const session = await insertSession(id)
    await changePerson(db(), admin, id, { role: 'operator' }, { demo: false })
    expect((await findLiveCredentials(db(), [session], { demo: false })).get(session.id)!.user.role).toBe('operator')
  })

  it('ends sessions, tokens and links when disabling; enabling brings back the tokens only', async () => {
    const { id } = await makeActive()
    const session = await insertSession(id)
    const token: Credential = { kind: 'token', id: (await createToken(db(), id, 'script')).id }
    await changePerson(db(), admin, id, { disabled: true }, { demo: false })
    expect([await isLive(session), await isLive(token)]).toEqual([false, false])
    await changePerson(db(), admin, id, { disabled: false }, { demo: false })
    expect([await isLive(session), await isLive(token)]).toEqual([false, true])
  })

  it('never takes away the last active admin, not even when two demote each other', async () => {
    await expect(changePerson(db(), admin, admin, { role: 'analyst' }, { demo: false })).rejects.toThrow(code('last-admin'))
    await expect(changePerson(db(), admin, admin, { disabled: true }, { demo: false })).rejects.toThrow(code('last-admin'))
    const invited = await invite(undefined, 'admin')
    await expect(changePerson(db(), admin, admin, { role: 'analyst' }, { demo: false })).rejects.toThrow(code('last-admin'))
    await acceptLink(db(), { token: invited.token, password: 'twelve or more' })
    const results = await Promise.allSettled([changePerson(db(), admin, invited.id, { role: 'guest' }, { demo: false }), changePerson(db(), invited.id, admin, { role: 'guest' }, { demo: false })])
    expect(results.map(result => result.status).sort()).toEqual(['fulfilled', 'rejected'])
    await db().update(users).set({ role: 'admin' }).where(eq(users.id, admin))
    await db().update(users).set({ role: 'analyst' }).where(eq(users.id, invited.id))
  })

  it('writes an audit entry with who, whom and what', async () => {
    const { id } = await makeActive()
    await changePerson(db(), admin, id, { role: 'technician' }, { demo: false })
    const entries = await db().select().from(auditEntries).where(eq(auditEntries.subject, id))
    expect(entries.map(entry => entry.action)).toEqual(['person invited', 'invitation accepted', 'person changed'])
    expect(entries[2]).toMatchObject({ userId: admin, details: { role: 'technician' } })
  })

  it('lists everybody once, page by page, with state and last use', async () => {
    const { id } = await makeActive()
    await insertSession(id)
    const all: string[] = []
    let cursor: string | undefined
    do {
      const page = await listPeople(db(), { limit: 3, cursor })
      all.push(...page.items.map(person => person.id))
      const found = page.items.find(person => person.id === id)
      if (found) expect(Date.now() - Date.parse(found.lastSeenAt!)).toBeLessThan(60_000)
      cursor = page.nextCursor ?? undefined
    } while (cursor)
    const rows = await db().select({ id: users.id }).from(users)
    expect(all.sort()).toEqual(rows.map(row => row.id).sort())
  })
})

describe('credentials', () => {
  it('count only while the session has not expired and its row is there', async () => {
    const user = await insertUser(db())
    const session = await insertSession(user)
    expect(await isLive(session)).toBe(true)
    expect(await isLive(await insertSession(user, -1))).toBe(false)
    await db().delete(sessions).where(eq(sessions.id, session.id))
    expect(await isLive(session)).toBe(false)
  })

  it('of tokens are stored as hashes, listed without secret and revoked by their owner only', async () => {
    const [owner, other] = [await insertUser(db()), await insertUser(db())]
    const { id, token } = await createToken(db(), owner, 'DAQ PC')
    const [row] = await db().select().from(apiTokens).where(eq(apiTokens.id, id))
    expect(row!.tokenHash).toBe(hashSecret(token))
    expect(JSON.stringify(await listTokens(db(), owner, { limit: 10 }))).not.toContain(token)
    await expect(revokeToken(db(), other, id)).rejects.toThrow(code('not-found'))
    await revokeToken(db(), owner, id)
    expect(await isLive({ kind: 'token', id })).toBe(false)
    expect(await listTokens(db(), owner, { limit: 10 })).toEqual({ items: [], nextCursor: null })
  })

  it('of tokens come page by page, newest first, each once', async () => {
    const owner = await insertUser(db())
    const made: string[] = []
    for (let count = 0; count < 5; count++) made.push((await createToken(db(), owner, `${count}`)).id)
    const seen: string[] = []
    let cursor: string | undefined
    do {
      const page = await listTokens(db(), owner, { limit: 2, cursor })
      seen.push(...page.items.map(item => item.id))
      cursor = page.nextCursor ?? undefined
    } while (cursor)
    expect(seen.sort()).toEqual(made.sort())
  })

  it('that have run out are swept away, the others stay', async () => {
    const user = await insertUser(db())
    const [live, expired] = [await insertSession(user), await insertSession(user, -1)]
    await forgetOldRows(db())
    const left = (await db().select({ id: sessions.id }).from(sessions).where(eq(sessions.userId, user))).map(row => row.id)
    expect(left).toEqual([live.id])
    expect(left).not.toContain(expired.id)
  })
})

describe('the first accounts', () => {
  const first = { adminEmail: 'Chief@Lab.example', adminPassword: 'the first password', demo: true, demoPassword: 'demo-password' }

  it('are made once: an admin and one demo person a role, whose password is kept as printed', async () => {
    await ensureAccounts(db(), first)
    await db().update(users).set({ passwordHash: await hashPassword('changed by a visitor'), role: 'guest', disabledAt: new Date() }).where(eq(users.email, 'analyst@demo.lampsum.example'))
    await ensureAccounts(db(), { ...first, adminPassword: 'another password' })
    expect(await tryToSignIn('chief@lab.example', 'the first password')).toMatchObject({ role: 'admin' })
    for (const role of ['technician', 'analyst', 'operator', 'admin', 'guest']) expect(await tryToSignIn(`${role}@demo.lampsum.example`, 'demo-password')).toMatchObject({ role })
  })

  it('of the demo are refused outside demo mode, by password and by an open session', async () => {
    const [person] = await db().select().from(users).where(eq(users.email, 'admin@demo.lampsum.example'))
    const session = await insertSession(person!.id)
    await expect(tryToSignIn('admin@demo.lampsum.example', 'demo-password', false)).rejects.toThrow(code('wrong-credentials'))
    expect([await isLive(session, true), await isLive(session, false)]).toEqual([true, false])
  })
})

describe('campaign scope', () => {
  it('is every campaign for the laboratory, those opened for a guest, and the same answer for closed and unknown', async () => {
    const analyst = await insertUser(db(), 'analyst')
    const guest = await insertUser(db(), 'guest')
    const [open, closed] = [await insertCampaign(db(), analyst), await insertCampaign(db(), analyst)]
    await db().insert(campaignGuests).values({ campaignId: open, userId: guest, grantedBy: analyst, createdAt: new Date() })
    const as = (id: string, role: 'analyst' | 'guest') => ({ id, role, email: '', name: '' })
    expect(await findOpenCampaign(db(), as(analyst, 'analyst'), 'campaign', closed)).toBe(closed)
    expect(await findOpenCampaign(db(), as(guest, 'guest'), 'campaign', open)).toBe(open)
    for (const id of [closed, randomUUID()]) await expect(findOpenCampaign(db(), as(guest, 'guest'), 'campaign', id)).rejects.toThrow(code('not-found'))
    await expect(findOpenCampaign(db(), as(analyst, 'analyst'), 'job', randomUUID())).rejects.toThrow(code('not-found'))
  })

  it('lets a guest see a frame set only once it is released', async () => {
    const analyst = await insertUser(db(), 'analyst')
    const guest = { id: await insertUser(db(), 'guest'), role: 'guest' as const, email: '', name: '' }
    const campaign = await insertCampaign(db(), analyst)
    await db().insert(campaignGuests).values({ campaignId: campaign, userId: guest.id, grantedBy: analyst, createdAt: new Date() })
    const id = randomUUID()
    await db().insert(frameSets).values({ id, acquisitionId: await insertAcquisition(db(), campaign, analyst), line: 1, frequencyHz: 412, state: 'draft', cutListVersion: 1, checks: [], groups: [], width: 2, height: 2, createdAt: new Date() })
    await expect(findOpenCampaign(db(), guest, 'frameSet', id)).rejects.toThrow(code('not-found'))
    await db().update(frameSets).set({ state: 'released' }).where(eq(frameSets.id, id))
    expect(await findOpenCampaign(db(), guest, 'frameSet', id)).toBe(campaign)
  })
})
