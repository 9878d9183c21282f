export default defineRoute('POST /api/campaigns/:id/guests', async ({ user, campaignId, body }) => {
  await openToGuest(useDatabase(), user, campaignId, body.userId)
  return { ok: true as const }
})
