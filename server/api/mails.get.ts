import { join } from 'node:path'
import { LampsumError } from '#shared/errors'

export default defineRoute('GET /api/mails', async ({ query }) => {
  if (!isDemo()) throw new LampsumError('not-found')
  return listMails(join(useRuntimeConfig().dataDir, 'mail'), query)
})
