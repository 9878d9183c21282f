import { mkdir } from 'node:fs/promises'
import { storeFolders } from '../store/fileStore'

const hourMs = 3600_000

/** Repairs what a crash or a database that was away has left: at the start, then every few seconds. */
export default defineNitroPlugin((nitro) => {
  const { incoming, store } = storeFolders(useRuntimeConfig().dataDir)
  let busy = false
  let nextSweepAt = 0
  const reconcile = async () => {
    if (busy) return
    busy = true
    try {
      await finishCompleteUploads(useDatabase(), incoming)
      if (Date.now() < nextSweepAt) return
      await removeIdleUploads(useDatabase(), incoming)
      await sweepIncoming(useDatabase(), incoming)
      nextSweepAt = Date.now() + hourMs
    } catch (error) {
      console.error('[uploads] Looking after uploads failed and is tried again:', (error as Error).message)
    } finally {
      busy = false
    }
  }
  void Promise.all([incoming, store].map(folder => mkdir(folder, { recursive: true }))).then(reconcile, error => console.error('[uploads]', error))
  const timer = setInterval(reconcile, 5000)
  nitro.hooks.hook('close', () => clearInterval(timer))
})
