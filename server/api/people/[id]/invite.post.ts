export default defineRoute('POST /api/people/:id/invite', async ({ user, params }) => {
  await resendLink(useDatabase(), user.id, params.id!, useRuntimeConfig().publicUrl)
  return { ok: true as const }
})
