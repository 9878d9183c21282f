export default defineRoute('GET /api/acquisitions/:id/light', ({ params, query }) => readLight(useDatabase(), useFileStore(), params.id!, query))
