export default defineRoute('GET /api/uploads', ({ user, query }) => listUploads(useDatabase(), user, query))
