/** A role may change while a tab sleeps: ask again when somebody comes back to it. */
export default defineNuxtPlugin(() => {
  const session = useSessionStore()
  let asked = Date.now()
  document.addEventListener('visibilitychange', () => {
    if (document.hidden || !session.user || Date.now() - asked < 60_000) return
    asked = Date.now()
    void session.load().catch(() => undefined)
  })
})
