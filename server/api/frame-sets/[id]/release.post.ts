export default defineRoute('POST /api/frame-sets/:id/release', async ({ user, params, body }) => {
  await releaseFrameSet(useDatabase(), user, params.id!, body.note)
  return { ok: true as const }
})
