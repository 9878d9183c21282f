export default defineRoute('GET /api/auth/link', async ({ query }) => {
  const { kind, email, name } = await readLink(useDatabase(), query.token)
  return { kind, email, name }
})
