const kept = 6

/**
 * One image of a frame set as raw values; the last few stay in memory, so that going back and forth is instant.
 *
 * @param version changes when the set has been solved again: what is shown is then read anew
 */
export function useFrameSetImage(frameSetId: string, name: Ref<string>, version: () => string | undefined = () => undefined) {
  const image = shallowRef<RawImage | null>(null)
  const shown = ref<string | null>(null)
  const cache = new Map<string, RawImage>()
  let current: AbortController | undefined

  const load = useAction(async (wanted: string) => {
    current?.abort()
    const mine = current = new AbortController()
    const result = cache.get(wanted) ?? await fetchImage(`/api/frame-sets/${frameSetId}/images/${encodeURIComponent(wanted)}`, mine.signal)
    cache.delete(wanted)
    cache.set(wanted, result)
    if (cache.size > kept) cache.delete(cache.keys().next().value!)
    if (mine.signal.aborted || name.value !== wanted) return
    image.value = result
    shown.value = wanted
  })
  onMounted(() => watch([name, version], async ([wanted], [, before]) => {
    if (before !== undefined && before !== version()) cache.clear()
    while (load.busy.value) await new Promise(resolve => setTimeout(resolve, 20))
    if (name.value === wanted) await load.run(wanted)
  }, { immediate: true }))
  onBeforeUnmount(() => current?.abort())
  return { image, shown, busy: load.busy, problem: load.problem, again: () => load.run(name.value) }
}

async function fetchImage(path: string, signal: AbortSignal): Promise<RawImage> {
  const response = await fetch(path, { signal })
  if (!response.ok) throw toProblem({ status: response.status, data: await response.json().catch(() => undefined) })
  const [rows, columns] = (response.headers.get('x-lampsum-shape') ?? '').split(',').map(Number)
  const buffer = await response.arrayBuffer()
  if (!rows || !columns || buffer.byteLength !== rows * columns * 4) throw new ApiProblem('server-error', 'The image arrived incomplete. Try again.', 500)
  return { rows, columns, values: response.headers.get('x-lampsum-type') === 'uint32' ? new Uint32Array(buffer) : new Float32Array(buffer) }
}
