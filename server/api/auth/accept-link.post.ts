export default defineRoute('POST /api/auth/accept-link', async ({ body }) => {
  await acceptLink(useDatabase(), body)
  return { ok: true as const }
})
