import { fileURLToPath } from 'node:url'

// https://nuxt.com/docs/api/configuration/nuxt-config
export default defineNuxtConfig({
  modules: ['@nuxt/eslint', '@nuxtjs/tailwindcss', '@pinia/nuxt', 'nuxt-auth-utils'],
  components: [{ path: '~/components', pathPrefix: false }],
  devtools: { enabled: false },
  app: {
    head: {
      htmlAttrs: { lang: 'en' },
      titleTemplate: '%s · Lampsum',
      link: [{ rel: 'icon', type: 'image/svg+xml', href: '/mark.svg' }],
    },
  },
  css: ['~/assets/css/main.css'],
  runtimeConfig: {
    // Filled from NUXT_… by scripts/start.ts; server/utils/config.ts refuses to run without them.
    databaseUrl: '',
    dataDir: '',
    solveWorker: '',
    demo: false,
    demoPassword: '',
    publicUrl: '',
    smtpUrl: '',
    adminEmail: '',
    adminPassword: '',
    session: {
      name: 'lampsum',
      maxAge: 60 * 60 * 24 * 7,
      sessionHeader: false,
      password: '',
      cookie: { secure: false, sameSite: 'lax', httpOnly: true },
    },
  },
  buildDir: process.env.LAMPSUM_BUILD_DIR || '.nuxt',
  compatibilityDate: '2026-11-01',
  nitro: {
    output: { dir: process.env.LAMPSUM_OUTPUT_DIR || '.output' },
  },
  typescript: {
    strict: true,
    tsConfig: { exclude: ['../jobs', '../scripts', '../tests', '../.output*', '../.data*', '../.nuxt-*'] },
  },
  telemetry: false,
  hooks: {
    // Ours first, for the API; pages keep Nuxt's own.
    'nitro:config': (nitroConfig) => {
      const config = nitroConfig as { errorHandler?: string | string[] }
      config.errorHandler = [fileURLToPath(new URL('./server/error', import.meta.url)), ...[config.errorHandler ?? []].flat()]
    },
  },
  // Pages ask /api/auth/me; the module's own session route is not part of the API and stays shut.
  auth: { loadStrategy: 'none' },
  eslint: { config: { stylistic: { indent: 2, semi: false, quotes: 'single', braceStyle: '1tbs' } } },
  tailwindcss: { cssPath: false, viewer: false },
})
