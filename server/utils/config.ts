import { z } from 'zod'

/** What scripts/start.ts hands over in NUXT_… variables and the web server cannot run without. */
const configSchema = z.object({
  databaseUrl: z.string().regex(/^(?:mysql|mariadb):\/\//, 'NUXT_DATABASE_URL is missing or is no mysql:// address. Start Lampsum with “npm start”, or set it to the address of its MariaDB.'),
  dataDir: z.string().min(1, 'NUXT_DATA_DIR is missing. Start Lampsum with “npm start”, or set it to the folder that holds its files.'),
  publicUrl: z.url('NUXT_PUBLIC_URL is missing or is no address. Set it to the address at which people open Lampsum, like https://lampsum.lab.example.'),
  session: z.object({ password: z.string().min(32, 'NUXT_SESSION_PASSWORD is missing or shorter than 32 characters. Start Lampsum with “npm start”, which makes one, or set it to a long random text.') }),
})

/** The first thing that is wrong with the configuration, as a sentence that says what to do; null when nothing is. */
export function findConfigProblem(config: unknown): string | null {
  const result = configSchema.safeParse(config)
  return result.success ? null : result.error.issues[0]!.message
}

/** Nitro turns `NUXT_DEMO=1` into a number and `NUXT_DEMO=true` into a boolean. */
export function isDemo(): boolean {
  return ['true', '1'].includes(String(useRuntimeConfig().demo))
}
