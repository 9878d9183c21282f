export default defineRoute('POST /api/people', async ({ user, body }) => ({
  id: await invitePerson(useDatabase(), user.id, body, useRuntimeConfig().publicUrl),
}))
