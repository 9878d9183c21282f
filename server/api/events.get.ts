export default defineRoute('GET /api/events', async ({ event }) => {
  const caller = await findCaller(event)
  await openEventStream(event, caller!)
})
