export default defineRoute('GET /api/acquisitions/:id/cut-list', ({ params }) => getCutList(useDatabase(), params.id!))
