import { can } from '#shared/permissions'

export default defineRoute('GET /api/frame-sets/:id', async ({ user, params }) => {
  const set = await getFrameSet(useDatabase(), params.id!)
  // Who looks at a draft may want to try it without a repetition a moment later.
  if (set.state === 'draft' && !set.superseded && can(user.role, 'frameSet.solve')) useSolver().warmUp()
  return set
})
