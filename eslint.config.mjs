import withNuxt from './.nuxt/eslint.config.mjs'

/** The numeric folders are pure: no framework, no database, no file system. */
const impure = ['nuxt*', '#*', 'h3', 'drizzle-orm*', 'mysql2*', 'node:*', 'fs', 'path', 'fluent-ffmpeg', 'sharp', '**/server/**']

export default withNuxt(
  { ignores: ['.output*/**', '.data*/**', '.nuxt*/**', 'server/db/migrations/**', 'jobs/kernels/assembly/**', 'jobs/kernels/*.wasm.ts'] },
  {
    rules: {
      'vue/multi-word-component-names': 'off',
      'vue/max-attributes-per-line': ['error', { singleline: 4 }],
      'max-lines': ['warn', { max: 300, skipBlankLines: true, skipComments: true }],
      'max-lines-per-function': ['warn', { max: 50, skipBlankLines: true, skipComments: true }],
    },
  },
  {
    files: ['tests/**/*.ts', '**/*.vue'],
    rules: { 'max-lines-per-function': 'off', 'max-lines': 'off' },
  },
  {
    files: ['jobs/signal/**/*.ts', 'jobs/imaging/**/*.ts', 'jobs/formats/**/*.ts'],
    rules: { 'no-restricted-imports': ['error', { patterns: [{ group: impure, message: 'jobs/signal, jobs/imaging and jobs/formats are pure and also run in the browser.' }] }] },
  },
)
