export default defineRoute('GET /api/frame-sets', ({ user, query }) => listFrameSets(useDatabase(), user, query))
