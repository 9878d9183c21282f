import { latin1, type RandomAccess } from './randomAccess'
import type { RecordTable } from './recordTable'

export const isUff = (head: Uint8Array): boolean => /^\s*-1\s*\r?\n\s*\d{1,4}b?\b/.test(latin1(head.subarray(0, 400)))

export async function openUff58(source: RandomAccess): Promise<RecordTable> {
  throw new Error(`not yet ${source.size}`)
}
