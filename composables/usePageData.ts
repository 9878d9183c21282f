interface Loaded<T> { value: T | null, problem: { message: string, status: number } | null }

/**
 * Loads what a page is about. A page that may not or cannot be shown becomes the error page; any later failure keeps
 * what is on the screen and says so in `problem`.
 */
export async function usePageData<T>(path: () => string, query?: () => Record<string, unknown>) {
  const api = useApi()
  const load = async (): Promise<Loaded<T>> => {
    try {
      return { value: await api<T>(path(), { query: query?.() }), problem: null }
    } catch (cause) {
      const { message, status } = toProblem(cause)
      return { value: null, problem: { message, status } }
    }
  }
  const key = `page:${path()}:${JSON.stringify(query?.() ?? {})}`
  const { data: state } = await useAsyncData<Loaded<T>>(key, load)
  const first = state.value
  if (first?.problem && [403, 404].includes(first.problem.status)) {
    throw createError({ statusCode: first.problem.status, statusMessage: 'Not shown', message: first.problem.message, fatal: true })
  }

  let turn = 0
  async function refresh() {
    const mine = ++turn
    const next = await load()
    if (mine !== turn) return
    state.value = next.problem ? { value: state.value?.value ?? null, problem: next.problem } : next
  }
  const data = computed(() => state.value?.value ?? null) as ComputedRef<T | null>
  const problem = computed(() => state.value?.problem?.message ?? null)
  return { data, problem, refresh }
}

/** A list with its "load more": `{ items, nextCursor }` of the API. */
export async function useListData<T>(path: () => string, query: () => Record<string, unknown> = () => ({})) {
  const api = useApi()
  const more = ref<T[]>([]) as Ref<T[]>
  const cursor = ref<string | null>()
  const loading = ref(false)
  const moreProblem = ref<string | null>(null)
  const { data, problem, refresh: reload } = await usePageData<Page<T>>(path, query)
  const nextCursor = computed(() => cursor.value === undefined ? data.value?.nextCursor ?? null : cursor.value)
  const items = computed(() => [...data.value?.items ?? [], ...more.value])

  async function loadMore() {
    if (!nextCursor.value || loading.value) return
    loading.value = true
    try {
      const page = await api<Page<T>>(path(), { query: { ...query(), cursor: nextCursor.value } })
      more.value = [...more.value, ...page.items]
      cursor.value = page.nextCursor
      moreProblem.value = null
    } catch (cause) {
      moreProblem.value = toProblem(cause).message
    } finally {
      loading.value = false
    }
  }
  async function refresh() {
    await reload()
    more.value = []
    cursor.value = undefined
  }
  return { items, nextCursor, loading, problem: computed(() => moreProblem.value ?? problem.value), refresh, loadMore, loaded: computed(() => data.value !== null) }
}
