export default defineRoute('POST /api/jobs/:id/retry', async ({ user, params }) => {
  await controlJob(useDatabase(), user.id, params.id!, 'retry')
  return { ok: true as const }
})
