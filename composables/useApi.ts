export interface ApiOptions {
  method?: 'GET' | 'POST' | 'PUT' | 'PATCH' | 'DELETE'
  query?: Record<string, unknown>
  body?: Record<string, unknown>
  signal?: AbortSignal
}
export interface Page<T> { items: T[], nextCursor: string | null }
export type Api = <T>(path: string, options?: ApiOptions) => Promise<T>

/**
 * Calls the API with the reader's own session (on the server, too) and throws ApiProblem. A session that has run out
 * sends the reader to the sign-in page, which brings them back.
 */
export function useApi(): Api {
  const nuxt = useNuxtApp()
  const send = (import.meta.server ? useRequestFetch() : $fetch) as (path: string, options?: object) => Promise<unknown>
  return async <T>(path: string, options?: ApiOptions) => {
    try {
      return await send(path, { retry: 0, ...options }) as T
    } catch (cause) {
      const problem = toProblem(cause)
      if (import.meta.client && problem.code === 'sign-in-needed') await nuxt.runWithContext(() => useSessionStore().lost())
      throw problem
    }
  }
}
