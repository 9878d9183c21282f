export default defineRoute('PATCH /api/campaigns/:id', async ({ campaignId, body }) => {
  await changeCampaign(useDatabase(), campaignId, body)
  return { ok: true as const }
})
