import { randomUUID } from 'node:crypto'
import type { IncomingMessage } from 'node:http'
import { ERRORS, Server, type CancellationContext, type Upload } from '@tus/server'
import { LampsumError } from '#shared/errors'
import type { User } from '#shared/schemas/people'
import { uploadLengthSchema, uploadMetadataSchema } from '#shared/schemas/uploads'
import type { Database } from '../db/client'
import { findOpenCampaign } from './scope'
import { describeTusError } from './tusErrors'
import { UploadLocker } from './uploadLocker'
import { trackProgress } from './uploadProgress'
import { receiveBody } from './uploadReceive'
import { diskHeadroomBytes, requireSpace } from './uploadSpace'
import { finishUpload, openUpload } from './uploadState'
import { UploadStore } from './uploadStore'
import { findUpload, mayHandleUpload, openReservationBytes } from './uploads'

export interface TusOptions {
  folder: string
  database: () => Database
  freeBytes: () => Promise<number>
  /** Who sent a request. */
  userOf: (request: IncomingMessage) => User
  drainMs?: number
}

type TusRequest = Parameters<Server['handleWeb']>[0]
type WriteToStore = (body: unknown, upload: Upload, limit: number, context: CancellationContext) => Promise<number>

const nodeRequest = (request: unknown) => (request as { runtime: { node: { req: IncomingMessage } } }).runtime.node.req

/** tus 1.0.0 for clips and records: the protocol by @tus/server, rows, space and bytes by us. */
export class TusServer extends Server {
  constructor({ folder, database, freeBytes, userOf, drainMs = 500 }: TusOptions) {
    const store = new UploadStore(folder, database)
    const inLine = oneAtATime()
    super({
      path: '/api/uploads', relativeLocation: true, datastore: store, locker: new UploadLocker(), lockDrainTimeout: drainMs,
      namingFunction: () => randomUUID(),
      // No other site has business here: no CORS headers at all.
      allowedOrigins: () => false,
      onResponseError: (request, error) => describeTusError(error, request.method),
      async onIncomingRequest(request, id) {
        if (request.method !== 'POST') await requireOwnUpload(database(), userOf(nodeRequest(request)), id)
      },
      async onUploadCreate(request, upload) {
        const user = userOf(nodeRequest(request))
        await inLine(() => admit(database(), user, upload, freeBytes))
        return {}
      },
      async onUploadFinish(_, upload) {
        await finishUpload(database(), upload.id)
        return {}
      },
    })
    takeNodeBodies(this)
    const write: WriteToStore = async (body, upload, limit, { signal }) => {
      if (signal.aborted) throw ERRORS.ABORTED
      if (upload.offset === upload.size) return upload.offset
      const progress = trackProgress(database, upload.id)
      try {
        return await receiveBody(body as IncomingMessage, { path: store.pathOf(upload.id), offset: upload.offset, limit, signal, onWritten: progress.note })
      } finally {
        progress.end()
      }
    }
    for (const handler of [this.handlers.PATCH, this.handlers.POST]) (handler as unknown as { writeToStore: WriteToStore }).writeToStore = write
  }
}

/** Hands Node's own request on as the body: the stock server would wrap it into a web stream. */
function takeNodeBodies(server: Server): void {
  const hooked = server as unknown as { handler: (request: TusRequest) => Promise<Response> }
  const handler = hooked.handler.bind(server)
  hooked.handler = (request) => {
    Object.defineProperty(request, 'body', { value: nodeRequest(request) })
    return handler(request)
  }
}

async function requireOwnUpload(database: Database, user: User, id: string): Promise<void> {
  const upload = await findUpload(database, id)
  if (!upload || !mayHandleUpload(user, upload.userId)) throw ERRORS.FILE_NOT_FOUND
  await findOpenCampaign(database, user, 'acquisition', upload.acquisitionId)
}

/** Checks what a client wants to send, and promises it its space. */
async function admit(database: Database, user: User, upload: Upload, freeBytes: () => Promise<number>): Promise<void> {
  const metadata = uploadMetadataSchema.safeParse(upload.metadata ?? {})
  if (!metadata.success) throw new LampsumError('upload-refused', metadata.error.issues[0]!.message)
  const length = uploadLengthSchema.safeParse(upload.size)
  if (!length.success) throw new LampsumError('upload-refused', length.error.issues[0]!.message)
  await findOpenCampaign(database, user, 'acquisition', metadata.data.acquisitionId).catch((error: unknown) => {
    throw error instanceof LampsumError && error.code === 'not-found' ? new LampsumError('not-found', 'This acquisition does not exist. Register it first, then upload to it.') : error
  })
  requireSpace({ bytes: length.data, freeBytes: await freeBytes(), promisedBytes: await openReservationBytes(database), headroomBytes: diskHeadroomBytes() })
  const now = new Date()
  await openUpload(database, {
    id: upload.id, userId: user.id, ...metadata.data, bytes: length.data, receivedBytes: 0, state: 'receiving',
    sha256: null, fileKey: null, message: null, createdAt: now, lastActivityAt: now, storedAt: null,
  })
}

/** Two uploads must not be promised the same space. */
function oneAtATime() {
  let last: Promise<unknown> = Promise.resolve()
  return <T>(work: () => Promise<T>): Promise<T> => {
    const mine = last.then(work, work)
    last = mine.catch(() => {})
    return mine
  }
}
