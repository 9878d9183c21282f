export default defineRoute('POST /api/queue/pause', async ({ user }) => {
  await setQueuePaused(useDatabase(), user.id, true)
  return { ok: true as const }
})
