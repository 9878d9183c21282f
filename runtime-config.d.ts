declare module 'nuxt/schema' {
  interface RuntimeConfig {
    databaseUrl: string
    dataDir: string
    solveWorker: string
    demo: boolean
    demoPassword: string
    publicUrl: string
    smtpUrl: string
    adminEmail: string
    adminPassword: string
  }
}

export {}
