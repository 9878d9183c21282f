export default defineRoute('GET /api/people', ({ query }) => listPeople(useDatabase(), query))
