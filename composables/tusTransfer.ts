import type { Upload as Transfer } from 'tus-js-client'

export interface TransferPlan {
  /** The unfinished upload to go on with; null starts a new one. */
  uploadId: string | null
  acquisitionId: string
  kind: FileKind
}
export interface TransferListener {
  located: (uploadId: string) => void
  progress: (sentBytes: number) => void
  sent: () => void
  failed: (cause: unknown) => void
}

const endpoint = '/api/uploads'
const retryDelays = [0, 1000, 3000, 5000, 10_000, 20_000]

/**
 * Sends a file by tus in one long request. Once the upload has an address, the endpoint is taken away: a refused
 * resume (a session that ran out, a server that is not ready) must not turn into a fresh upload of the same bytes.
 * The client library is fetched with the first file.
 */
export async function startTransfer(file: File, plan: TransferPlan, listener: TransferListener): Promise<Transfer> {
  const { Upload } = await import('tus-js-client')
  const transfer: Transfer = new Upload(file, {
    ...(plan.uploadId ? { uploadUrl: `${endpoint}/${plan.uploadId}` } : { endpoint }),
    retryDelays, chunkSize: Infinity, storeFingerprintForResuming: false, removeFingerprintOnSuccess: true,
    metadata: { filename: file.name, filetype: file.type, acquisitionId: plan.acquisitionId, kind: plan.kind, part: '1' },
    onUploadUrlAvailable: () => {
      const uploadId = transfer.url?.split('/').pop()
      if (!uploadId) return
      transfer.options.endpoint = null
      listener.located(uploadId)
    },
    onProgress: listener.progress,
    onSuccess: listener.sent,
    onError: listener.failed,
  })
  transfer.start()
  return transfer
}
