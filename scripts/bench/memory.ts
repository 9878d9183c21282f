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

/** Samples until `stop`, which answers the largest value seen. */
export function watchMemory(pid: number): { stop: () => number } {
  let most = 0
  const timer = setInterval(() => most = Math.max(most, residentBytes(pid)), 150)
  return {
    stop() {
      clearInterval(timer)
      return most
    },
  }
}
