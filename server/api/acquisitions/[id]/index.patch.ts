export default defineRoute('PATCH /api/acquisitions/:id', async ({ params, body }) => {
  await changeAcquisition(useDatabase(), params.id!, body)
  return { ok: true as const }
})
