export default defineRoute('GET /api/acquisitions/:id', ({ params }) => getAcquisition(useDatabase(), params.id!))
