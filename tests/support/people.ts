import { randomBytes, scryptSync } from 'node:crypto'
import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { vi } from 'vitest'
import { setMailServer } from '../../server/utils/mail'
import { listMails, startMailSink } from '../../server/utils/mailSink'

export const publicUrl = 'https://lampsum.lab.example'

/** What Nuxt would import by itself into server/utils: the hash functions of nuxt-auth-utils and the configuration. */
export function stubServerImports(): void {
  vi.stubGlobal('hashPassword', async (password: string) => {
    const salt = randomBytes(8).toString('hex')
    return `${salt}$${scryptSync(password, salt, 32).toString('hex')}`
  })
  vi.stubGlobal('verifyPassword', async (hash: string, password: string) => hash.split('$')[1] === scryptSync(password, hash.split('$')[0]!, 32).toString('hex'))
  vi.stubGlobal('useRuntimeConfig', () => ({ publicUrl, demo: false }))
}

/** The real local mail server, with what came in. */
export async function startTestMail() {
  const folder = mkdtempSync(join(tmpdir(), 'lampsum-mail-'))
  const sink = await startMailSink(folder)
  setMailServer(sink.url)
  return {
    mailsTo: async (email: string) => (await listMails(folder, { limit: 200 })).items.filter(mail => mail.to === email),
    async stop() {
      setMailServer(null)
      await sink.close()
      rmSync(folder, { recursive: true, force: true })
    },
  }
}
