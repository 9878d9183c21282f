import { acceptAlignment } from '../../../../jobs/queue/acceptAlignment'

export default defineRoute('PUT /api/acquisitions/:id/alignment', async ({ user, params, body }) => {
  await acceptAlignment(useDatabase(), params.id!, body, user.id)
  return getAlignment(useDatabase(), params.id!)
})
