export default defineRoute('POST /api/auth/sign-out', async ({ event }) => {
  await endSession(event)
  return { ok: true as const }
})
