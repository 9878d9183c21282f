import { join } from 'node:path'

/** Mails go to the SMTP server of the configuration; without one, a local one keeps them in the data directory. */
export default defineNitroPlugin((nitro) => {
  const { smtpUrl, dataDir } = useRuntimeConfig()
  if (smtpUrl) {
    setMailServer(smtpUrl)
    return
  }
  const sink = startMailSink(join(dataDir, 'mail'))
  sink.then(({ url }) => setMailServer(url), error => console.error('[mail] The local mail server could not start:', error))
  if (!isDemo()) console.warn('[mail] No mail server is set, so invitations and password links stay in the data directory’s mail folder. Set LAMPSUM_SMTP_URL to send them.')
  nitro.hooks.hook('close', async () => {
    setMailServer(null)
    await sink.then(each => each.close(), () => {})
  })
})
