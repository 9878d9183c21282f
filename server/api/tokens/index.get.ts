export default defineRoute('GET /api/tokens', ({ user, query }) => listTokens(useDatabase(), user.id, query))
