export default defineRoute('POST /api/jobs/:id/hold', async ({ user, params }) => {
  await controlJob(useDatabase(), user.id, params.id!, 'hold')
  return { ok: true as const }
})
