export default defineRoute('POST /api/jobs/:id/resume', async ({ user, params }) => {
  await controlJob(useDatabase(), user.id, params.id!, 'resume')
  return { ok: true as const }
})
