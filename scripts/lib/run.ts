import { StartError } from './settings'

/** Runs a command; what a person can mend is told in a sentence, without a stack. */
export function run(main: () => Promise<void>): void {
  main().catch((error: unknown) => {
    console.error(error instanceof StartError ? `\n${error.message}` : error)
    process.exitCode = 1
  })
}
