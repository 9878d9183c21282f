export default defineRoute('DELETE /api/campaigns/:id/guests/:userId', async ({ user, campaignId, params }) => {
  await closeToGuest(useDatabase(), user, campaignId, params.userId!)
  return { ok: true as const }
})
