export default defineRoute('DELETE /api/tokens/:id', async ({ user, params }) => {
  await revokeToken(useDatabase(), user.id, params.id!)
  return { ok: true as const }
})
