/** Something a person asked for: busy while it runs, its problem as a sentence, its fields for the form. */
export function useAction<A extends unknown[], R = void>(work: (...input: A) => Promise<R>) {
  const busy = ref(false)
  const problem = ref<string | null>(null)
  const fields = ref<Record<string, string>>({})

  async function run(...input: A): Promise<R | undefined> {
    if (busy.value) return undefined
    busy.value = true
    problem.value = null
    fields.value = {}
    try {
      return await work(...input)
    } catch (cause) {
      const known = toProblem(cause)
      problem.value = known.message
      fields.value = known.fields
      return undefined
    } finally {
      busy.value = false
    }
  }
  return { run, busy: readonly(busy), problem, fields }
}
