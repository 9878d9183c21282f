import { createLocalFileStore, storeFolders, type FileStore } from '../store/fileStore'

let store: FileStore | undefined

/** The web server's file store; it only reads from it. */
export function useFileStore(): FileStore {
  store ??= createLocalFileStore(storeFolders(useRuntimeConfig().dataDir).store)
  return store
}
