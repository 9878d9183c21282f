export default defineRoute('GET /api/acquisitions', ({ query }) => listAcquisitions(useDatabase(), query))
