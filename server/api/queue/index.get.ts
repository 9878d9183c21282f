export default defineRoute('GET /api/queue', async () => readQueue(useDatabase(), await useFileStore().freeBytes()))
