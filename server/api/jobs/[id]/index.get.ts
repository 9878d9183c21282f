export default defineRoute('GET /api/jobs/:id', ({ params }) => getJob(useDatabase(), params.id!))
