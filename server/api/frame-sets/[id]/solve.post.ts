import { join } from 'node:path'

export default defineRoute('POST /api/frame-sets/:id/solve', ({ user, params, body }) =>
  solveFrameSetAgain({ database: useDatabase(), store: useFileStore(), solver: useSolver(), solving: join(useRuntimeConfig().dataDir, 'solving') }, user, params.id!, body.reject))
