export default defineRoute('GET /api/campaigns/:id/guests', ({ campaignId }) => listGuests(useDatabase(), campaignId))
