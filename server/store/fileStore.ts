import { createReadStream } from 'node:fs'
import { mkdir, open, rename, rm, stat, statfs } from 'node:fs/promises'
import { dirname, join, resolve, sep } from 'node:path'
import type { Readable } from 'node:stream'

/**
 * Where files live. Keys are made by the program (never a client's file name), like `clips/<id>`. A file appears
 * whole or not at all. Object storage will take this interface's place one day, so nothing else may touch paths.
 */
export interface FileStore {
  /** Moves a finished local file in: synced, then renamed, so a crash leaves either nothing or all of it. */
  put: (key: string, localPath: string) => Promise<void>
  /** The same for several files, with one wait for the disk. */
  putAll: (files: { key: string, localPath: string }[]) => Promise<void>
  openRange: (key: string, range?: { start: number, end: number }) => Readable
  stat: (key: string) => Promise<{ bytes: number } | null>
  remove: (key: string) => Promise<void>
  /** ffmpeg and the like need a path; only for reading. */
  localPath: (key: string) => string
  freeBytes: () => Promise<number>
}

export function createLocalFileStore(root: string): FileStore {
  const pathOf = (key: string) => {
    const path = resolve(root, key)
    if (!path.startsWith(resolve(root) + sep)) throw new Error(`The key “${key}” leads out of the store.`)
    return path
  }
  async function putAll(files: { key: string, localPath: string }[]): Promise<void> {
    const moves = files.map(({ key, localPath }) => ({ path: pathOf(key), localPath }))
    const folders = [...new Set(moves.map(({ path }) => dirname(path)))]
    for (const folder of folders) await mkdir(folder, { recursive: true })
    await Promise.all(moves.map(({ localPath }) => syncPath(localPath)))
    for (const { path, localPath } of moves) await rename(localPath, path)
    await Promise.all(folders.map(syncPath))
  }
  return {
    put: (key, localPath) => putAll([{ key, localPath }]),
    putAll,
    openRange: (key, range) => createReadStream(pathOf(key), range ?? {}),
    async stat(key) {
      try {
        return { bytes: (await stat(pathOf(key))).size }
      } catch (error) {
        if ((error as NodeJS.ErrnoException).code === 'ENOENT') return null
        throw error
      }
    },
    remove: key => rm(pathOf(key), { force: true }),
    localPath: pathOf,
    async freeBytes() {
      const { bavail, bsize } = await statfs(root)
      return bavail * bsize
    },
  }
}

async function syncPath(path: string): Promise<void> {
  const handle = await open(path, 'r')
  try {
    await handle.sync()
  } finally {
    await handle.close()
  }
}

/** The folders below the data directory that web server and runner share. */
export const storeFolders = (dataDir: string) => ({
  store: join(dataDir, 'store'),
  /** tus writes here; a verified upload moves into the store by rename, so both lie on one file system. */
  incoming: join(dataDir, 'incoming'),
  /** One folder an attempt; whatever is found here at start belongs to nobody. */
  work: join(dataDir, 'work'),
})
