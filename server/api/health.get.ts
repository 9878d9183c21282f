export default defineRoute('GET /api/health', () => readHealth(useDatabase()))
