import { createReadStream, statSync } from 'node:fs'
import { basename } from 'node:path'
import { Upload } from 'tus-js-client'

/** Uploads a file with an unmodified tus-js-client; answers the upload's address. */
export function uploadFile(url: string, headers: Record<string, string>, path: string, metadata: Record<string, string>): Promise<string> {
  return new Promise((resolve, reject) => {
    const upload = new Upload(createReadStream(path), {
      endpoint: `${url}/api/uploads`, headers, uploadSize: statSync(path).size, chunkSize: 1 << 20,
      metadata: { filename: basename(path), filetype: 'application/octet-stream', ...metadata },
      onSuccess: () => resolve(upload.url!), onError: reject,
    })
    upload.start()
  })
}
