import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { createTransport } from 'nodemailer'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { parseMail } from '../../../server/utils/mailParse'
import { listMails, startMailSink, type MailSink } from '../../../server/utils/mailSink'

describe('reading a mail', () => {
  // Examples in the forms of RFC 2047 section 8 and RFC 2045 section 6.7.
  it('decodes encoded words, joins neighbours and unfolds', () => {
    expect(parseMail('Subject: =?UTF-8?Q?Gr=C3=BC=C3=9Fe_aus?=\r\n =?utf-8?B?IGRlbSBMYWJvcg==?=\r\n\r\nx').subject).toBe('Grüße aus dem Labor')
    expect(parseMail('subject: plain\r\n\r\nx').subject).toBe('plain')
  })

  it('decodes quoted-printable with soft line breaks and keeps the blanks before them', () => {
    expect(parseMail('Content-Transfer-Encoding: quoted-printable\r\n\r\nfor you. =\r\nCaf=C3=A9 a=3Db\r\n').text).toBe('for you. Café a=b\n')
  })

  it('decodes base64 and plain 8 bit', () => {
    expect(parseMail(`Content-Transfer-Encoding: base64\r\n\r\n${Buffer.from('größer').toString('base64')}`).text).toBe('größer')
    expect(parseMail(`Subject: x\r\n\r\n${Buffer.from('größer').toString('latin1')}`).text).toBe('größer')
  })
})

describe('the local mail server', () => {
  const folder = mkdtempSync(join(tmpdir(), 'lampsum-mail-'))
  let sink: MailSink
  beforeAll(async () => {
    sink = await startMailSink(folder)
  })
  afterAll(async () => {
    await sink.close()
    rmSync(folder, { recursive: true, force: true })
  })

  it('keeps what is sent to it, newest first, page by page, with long links unbroken', async () => {
    const transport = createTransport(sink.url, { from: 'lampsum@lab.example' })
    const link = `https://lampsum.lab.example/welcome?token=${'aB9_-'.repeat(30)}`
    for (const subject of ['first', 'Zweite Grüße', 'third']) await transport.sendMail({ to: { name: 'Zoë', address: 'zoe@lab.example' }, subject, text: `Hällo,\n\nthis is a line that is longer than the seventy-six characters of a coded line.\n\n${link}\n` })
    const first = await listMails(folder, { limit: 2 })
    expect(first.items.map(mail => [mail.to, mail.subject])).toEqual([['zoe@lab.example', 'third'], ['zoe@lab.example', 'Zweite Grüße']])
    expect(first.items[0]!.text).toBe(`Hällo,\n\nthis is a line that is longer than the seventy-six characters of a coded line.\n\n${link}\n`)
    const rest = await listMails(folder, { limit: 2, cursor: first.nextCursor! })
    expect(rest.items.map(mail => mail.subject)).toEqual(['first'])
    expect(rest.nextCursor).toBeNull()
  })
})
