import { randomUUID } from 'node:crypto'
import { mkdir, readdir, readFile, rename, rm, writeFile } from 'node:fs/promises'
import type { AddressInfo } from 'node:net'
import { join } from 'node:path'
import { SMTPServer } from 'smtp-server'
import type { Mail } from '#shared/schemas/people'
import { parseMail } from './mailParse'

const mailsKept = 500
const largestMailBytes = 1 << 20

export interface MailSink {
  url: string
  close: () => Promise<void>
}

/** A mail server on loopback that delivers nothing: each mail becomes a JSON file in `folder`. */
export async function startMailSink(folder: string): Promise<MailSink> {
  await mkdir(folder, { recursive: true, mode: 0o700 })
  const server = new SMTPServer({
    authOptional: true,
    disabledCommands: ['AUTH', 'STARTTLS'],
    disableReverseLookup: true,
    size: largestMailBytes,
    onData(stream, session, done) {
      collect(stream).then(raw => keepMail(folder, raw, session.envelope.rcptTo.map(each => each.address).join(', '))).then(() => done(), done)
    },
  })
  server.on('error', error => console.error('[mail] The local mail server:', error))
  await new Promise<void>((resolve, reject) => {
    server.server.once('error', reject)
    server.listen(0, '127.0.0.1', resolve)
  })
  const { port } = server.server.address() as AddressInfo
  return { url: `smtp://127.0.0.1:${port}`, close: () => new Promise(resolve => server.close(resolve)) }
}

async function collect(stream: AsyncIterable<Buffer>): Promise<string> {
  const chunks: Buffer[] = []
  let bytes = 0
  for await (const chunk of stream) {
    bytes += chunk.length
    if (bytes <= largestMailBytes) chunks.push(chunk)
  }
  return Buffer.concat(chunks).toString('latin1')
}

async function keepMail(folder: string, raw: string, to: string): Promise<void> {
  const receivedAt = new Date().toISOString()
  // Names sort by time, so the folder is the list.
  const id = `${receivedAt.replaceAll(/[-:.]/g, '')}-${randomUUID().slice(0, 8)}`
  const mail: Mail = { id, to, ...parseMail(raw), receivedAt }
  await writeFile(join(folder, `${id}.new`), JSON.stringify(mail, null, 2), { mode: 0o600 })
  await rename(join(folder, `${id}.new`), join(folder, `${id}.json`))
  for (const old of (await mailIds(folder)).slice(mailsKept)) await rm(join(folder, `${old}.json`), { force: true })
}

async function mailIds(folder: string): Promise<string[]> {
  const names = await readdir(folder).catch(() => [])
  return names.filter(name => name.endsWith('.json')).map(name => name.slice(0, -5)).sort().reverse()
}

/** Mails in the folder, newest first; the cursor is the last id of the page before. */
export async function listMails(folder: string, { limit, cursor }: { limit: number, cursor?: string }): Promise<{ items: Mail[], nextCursor: string | null }> {
  const ids = (await mailIds(folder)).filter(id => !cursor || id < cursor)
  const page = ids.slice(0, limit)
  const items = await Promise.all(page.map(async id => JSON.parse(await readFile(join(folder, `${id}.json`), 'utf8')) as Mail))
  return { items, nextCursor: ids.length > limit ? page.at(-1)! : null }
}
