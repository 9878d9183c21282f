export default defineRoute('POST /api/jobs/:id/cancel', async ({ user, params }) => {
  await controlJob(useDatabase(), user.id, params.id!, 'cancel')
  return { ok: true as const }
})
