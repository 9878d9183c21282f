import { acceptCutList } from '../../../../jobs/queue/acceptCutList'

export default defineRoute('PUT /api/acquisitions/:id/cut-list', async ({ user, params, body }) => {
  await acceptCutList(useDatabase(), params.id!, body.groups, user.id)
  return getCutList(useDatabase(), params.id!)
})
