import { closeSync, fstatSync, openSync, readSync } from 'node:fs'
import type { RandomAccess } from '../formats/randomAccess'

/**
 * A file that is read in pieces; each piece has memory of its own. For worker threads, where waiting for the disk holds
 * nobody up.
 *
 * @param onRead told the offset before each piece; may throw to end the reading
 */
export function openFileSource(path: string, onRead: (offset: number) => void = () => {}): RandomAccess & { close: () => void } {
  const file = openSync(path, 'r')
  const read = (offset: number, length: number) => {
    onRead(offset)
    const bytes = new Uint8Array(length)
    let filled = 0
    while (filled < length) {
      const count = readSync(file, bytes, filled, length - filled, offset + filled)
      if (!count) break
      filled += count
    }
    return bytes.subarray(0, filled)
  }
  return { size: fstatSync(file).size, readSync: read, read: (offset, length) => Promise.resolve().then(() => read(offset, length)), close: () => closeSync(file) }
}
