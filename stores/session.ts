import { can, type Permission } from '#shared/permissions'
import type { User } from '#shared/schemas/people'

/** Who is signed in, as the server sees it now; a role may change while somebody works. */
export const useSessionStore = defineStore('session', () => {
  const api = useApi()
  const user = ref<User | null>(null)
  const asked = ref(false)

  async function load() {
    try {
      user.value = await api<User>('/api/auth/me')
    } catch (cause) {
      if (toProblem(cause).status !== 401) throw cause
      user.value = null
    } finally {
      asked.value = true
    }
  }
  async function signIn(email: string, password: string) {
    user.value = await api<User>('/api/auth/sign-in', { method: 'POST', body: { email, password } })
    asked.value = true
  }
  async function signOut() {
    await api('/api/auth/sign-out', { method: 'POST' }).catch((cause) => {
      if (toProblem(cause).status !== 401) throw cause
    })
    user.value = null
  }
  /** The server no longer knows this session. */
  async function lost() {
    if (!user.value) return
    user.value = null
    const route = useRoute()
    if (!route.meta.public) await navigateTo({ path: '/sign-in', query: { to: route.fullPath, again: '1' } })
  }
  const may = (permission: Permission) => user.value !== null && can(user.value.role, permission)

  return { user, asked, load, signIn, signOut, lost, may }
})
