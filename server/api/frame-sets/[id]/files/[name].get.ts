export default defineRoute('GET /api/frame-sets/:id/files/:name', async ({ event, params }) => {
  await sendDownload(event, await frameSetDownload(useDatabase(), useFileStore(), params.id!, params.name!))
})
