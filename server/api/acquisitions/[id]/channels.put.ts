export default defineRoute('PUT /api/acquisitions/:id/channels', async ({ params, body }) => {
  await changeAcquisition(useDatabase(), params.id!, { channels: body })
  return { ok: true as const }
})
