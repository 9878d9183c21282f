/** Bytes on the move: warn before the page is left, go on when the network or the session is back. */
export default defineNuxtPlugin(() => {
  const uploads = useUploadsStore()
  const session = useSessionStore()
  addEventListener('beforeunload', (event) => {
    if (uploads.moving.length) event.preventDefault()
  })
  addEventListener('online', () => uploads.wake())
  watch(() => session.user?.id, user => user && uploads.wake())
})
