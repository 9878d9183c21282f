export default defineRoute('PATCH /api/camera-profiles/:id', async ({ user, params, body }) => {
  await changeCameraProfile(useDatabase(), user.id, params.id!, body)
  return { ok: true as const }
})
