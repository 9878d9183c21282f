/** Refuses to run on a broken configuration, then makes the accounts that must be there, however long the database takes. */
export default defineNitroPlugin((nitro) => {
  const config = useRuntimeConfig()
  const problem = findConfigProblem(config)
  if (problem) {
    console.error(problem)
    process.exit(1)
  }
  let stopped = false
  nitro.hooks.hook('close', async () => {
    stopped = true
    await closeDatabase()
  })
  void decoyHash()
  void makeAccounts(() => stopped)
})

async function makeAccounts(stopped: () => boolean): Promise<void> {
  const { adminEmail, demoPassword } = useRuntimeConfig()
  // Nitro parses values: a password made of digits would become a number.
  const adminPassword = process.env.NUXT_ADMIN_PASSWORD ?? ''
  while (!stopped()) {
    try {
      await ensureAccounts(useDatabase(), { adminEmail, adminPassword, demo: isDemo(), demoPassword: String(demoPassword) })
      return markStarted()
    } catch (error) {
      if (!stopped()) console.error('[start] The first accounts could not be made yet:', (error as Error).message)
      await new Promise(resolve => setTimeout(resolve, 1000))
    }
  }
}
