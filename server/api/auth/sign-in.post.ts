export default defineRoute('POST /api/auth/sign-in', async ({ event, body }) => {
  const user = await signIn(useDatabase(), { ...body, address: getRequestIP(event) ?? '' }, { demo: isDemo() })
  await startSession(event, user.id)
  return user
})
