import { fileURLToPath } from 'node:url'
import { defineConfig } from 'vitest/config'

const alias = {
  '#shared': fileURLToPath(new URL('./shared', import.meta.url)),
  '~': fileURLToPath(new URL('.', import.meta.url)),
}

/**
 * unit: pure code, no services. reference: checks against outside programs (numpy, ffmpeg).
 * db: the real MariaDB. e2e: the built application, a browser, tus clients.
 */
export default defineConfig({
  resolve: { alias },
  test: {
    projects: [
      { resolve: { alias }, test: { name: 'unit', include: ['tests/unit/**/*.test.ts'], testTimeout: 60_000 } },
      { resolve: { alias }, test: { name: 'reference', include: ['tests/reference/**/*.test.ts'], testTimeout: 180_000, fileParallelism: false } },
      { resolve: { alias }, test: { name: 'db', include: ['tests/db/**/*.test.ts'], globalSetup: ['tests/support/mariaDbSetup.ts'], testTimeout: 60_000, hookTimeout: 120_000, fileParallelism: false } },
      { resolve: { alias }, test: { name: 'e2e', include: ['tests/e2e/**/*.test.ts'], testTimeout: 300_000, hookTimeout: 300_000, fileParallelism: false } },
    ],
  },
})
