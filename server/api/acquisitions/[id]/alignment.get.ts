export default defineRoute('GET /api/acquisitions/:id/alignment', ({ params }) => getAlignment(useDatabase(), params.id!))
