export default defineRoute('POST /api/tokens', ({ user, body }) => createToken(useDatabase(), user.id, body.name))
