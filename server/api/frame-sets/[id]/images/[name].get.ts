export default defineRoute('GET /api/frame-sets/:id/images/:name', async ({ event, params }) => {
  await sendDownload(event, await frameSetImage(useDatabase(), useFileStore(), params.id!, params.name!))
})
