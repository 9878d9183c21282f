export default defineRoute('PATCH /api/people/:id', async ({ user, params, body }) => {
  await changePerson(useDatabase(), user.id, params.id!, body, { demo: isDemo() })
  return { ok: true as const }
})
