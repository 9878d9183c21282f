export default defineRoute('POST /api/camera-profiles', async ({ user, body }) => ({ id: await createCameraProfile(useDatabase(), user.id, body) }))
