/** Keeps the last few results of slow work on things that never change; a failure is not kept. */
export function recentlyUsed<T>(size: number) {
  const kept = new Map<string, Promise<T>>()
  return (key: string, make: () => Promise<T>): Promise<T> => {
    const found = kept.get(key) ?? make()
    kept.delete(key)
    kept.set(key, found)
    found.catch(() => kept.delete(key))
    if (kept.size > size) kept.delete(kept.keys().next().value!)
    return found
  }
}
