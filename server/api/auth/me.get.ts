export default defineRoute('GET /api/auth/me', async ({ user }) => user)
