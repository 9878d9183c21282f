import * as pinia from 'pinia'
import * as vue from 'vue'
import { vi } from 'vitest'

/** What Nuxt imports by itself, for code under test: Vue's names, Pinia's, and the composables given. */
export function stubAutoImports(...modules: Record<string, unknown>[]) {
  for (const module of [vue, { defineStore: pinia.defineStore }, ...modules]) {
    for (const [name, value] of Object.entries(module)) {
      if (/^[a-z]/.test(name) || typeof value === 'function') vi.stubGlobal(name, value)
    }
  }
}
