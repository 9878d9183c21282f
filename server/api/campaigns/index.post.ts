export default defineRoute('POST /api/campaigns', async ({ user, body }) => ({ id: await createCampaign(useDatabase(), user, body) }))
