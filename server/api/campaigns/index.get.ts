export default defineRoute('GET /api/campaigns', ({ user, query }) => listCampaigns(useDatabase(), user, query))
