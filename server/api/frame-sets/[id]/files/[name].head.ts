export default defineRoute('HEAD /api/frame-sets/:id/files/:name', async ({ event, params }) => {
  await sendDownload(event, await frameSetDownload(useDatabase(), useFileStore(), params.id!, params.name!))
})
