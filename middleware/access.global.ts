/** Pages are closed unless they say `public`; a page that names a permission is closed to other roles. */
export default defineNuxtRouteMiddleware(async (to) => {
  // The error page that came from the server stands already.
  if (import.meta.client && useNuxtApp().isHydrating && useError().value) return
  const session = useSessionStore()
  if (!session.asked) await session.load()
  if (to.meta.public || !to.matched.length) return
  if (!session.user) return navigateTo({ path: '/sign-in', query: to.fullPath === '/' ? {} : { to: to.fullPath } })
  if (to.meta.permission && !session.may(to.meta.permission)) {
    return abortNavigation(createError({ statusCode: 403, statusMessage: 'Not allowed', message: `Your role (${session.user.role}) may not open this page. Ask an admin if you need it.`, fatal: true }))
  }
})
