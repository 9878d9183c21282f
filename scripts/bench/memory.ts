import { readFileSync } from 'node:fs'
import { childrenOf } from '../../tests/support/application'

/** Resident bytes of a process and all below it; pages that two of them share count twice. */
export function residentBytes(pid: number): number {
  let own = 0
  try {
    own = 1024 * Number(/VmRSS:\s+(\d+) kB/.exec(readFileSync(`/proc/${pid}/status`, 'utf8'))?.[1] ?? 0)
  } catch {
    return 0
  }
  return childrenOf(pid).reduce((sum, child) => sum + residentBytes(child), own)
}

/** Samples until `stop`, which answers the largest value seen under each mark. */
export function watchMemory(pid: number): { mark: (name: string) => void, stop: () => Map<string, number> } {
  const most = new Map<string, number>()
  let current = 'start'
  const timer = setInterval(() => most.set(current, Math.max(most.get(current) ?? 0, residentBytes(pid))), 150)
  return {
    mark(name) {
      current = name
    },
    stop() {
      clearInterval(timer)
      return most
    },
  }
}
