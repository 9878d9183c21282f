export default defineRoute('POST /api/auth/request-reset', async ({ event, body }) => {
  await requestReset(useDatabase(), { email: body.email, address: getRequestIP(event) ?? '' }, { publicUrl: useRuntimeConfig().publicUrl, demo: isDemo() })
  return { ok: true as const }
})
