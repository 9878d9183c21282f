export default defineRoute('GET /api/camera-profiles', ({ query }) => listCameraProfiles(useDatabase(), query))
