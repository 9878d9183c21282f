export default defineRoute('GET /api/jobs', ({ query }) => listJobs(useDatabase(), query))
