import { restartFrom } from '../../../../jobs/queue/advance'

export default defineRoute('POST /api/acquisitions/:id/process', ({ params, body }) => restartFrom(useDatabase(), params.id!, body.from ?? null))
