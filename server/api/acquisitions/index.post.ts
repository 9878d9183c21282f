export default defineRoute('POST /api/acquisitions', async ({ user, body }) => ({ id: await createAcquisition(useDatabase(), user, body) }))
