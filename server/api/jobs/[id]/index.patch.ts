export default defineRoute('PATCH /api/jobs/:id', async ({ user, params, body }) => {
  await prioritiseJob(useDatabase(), user.id, params.id!, body.priority)
  return { ok: true as const }
})
