export default defineRoute('GET /api/frame-sets/:id', ({ params }) => getFrameSet(useDatabase(), params.id!))
