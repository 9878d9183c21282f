export default defineRoute('GET /api/runners', ({ query }) => listRunners(useDatabase(), query))
