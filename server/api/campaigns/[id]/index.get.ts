export default defineRoute('GET /api/campaigns/:id', ({ user, campaignId }) => getCampaign(useDatabase(), user, campaignId))
