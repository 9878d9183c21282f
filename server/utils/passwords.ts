import { randomBytes } from 'node:crypto'

let decoy: Promise<string> | undefined

/** A hash that no password fits. Made at start, because the first sign-in of an unknown person must not take longer. */
export const decoyHash = () => decoy ??= hashPassword(randomBytes(24).toString('base64url'))

/** Compares with scrypt, and does the same work when there is no hash: time tells nobody who has an account. */
export async function passwordFits(hash: string | null, password: string): Promise<boolean> {
  const fits = await verifyPassword(hash ?? await decoyHash(), password)
  return fits && hash !== null
}
