export default defineRoute('POST /api/queue/resume', async ({ user }) => {
  await setQueuePaused(useDatabase(), user.id, false)
  return { ok: true as const }
})
