import type { Upload } from '#shared/schemas/campaigns'

export type FileKind = Upload['kind']

const clipEndings = ['mp4', 'mov', 'm4v', 'mkv', 'avi', 'mts', 'm2ts', 'ts', 'mxf', 'webm']
const recordEndings = ['csv', 'tsv', 'txt', 'asc', 'dat', 'wav', 'npy', 'unv', 'uff']

/** What a file most likely is, by its ending; null when a person has to say. */
export function guessKind(name: string, type = ''): FileKind | null {
  const ending = name.split('.').pop()?.toLowerCase() ?? ''
  if (clipEndings.includes(ending) || type.startsWith('video/')) return 'clip'
  if (recordEndings.includes(ending) || type.startsWith('text/')) return 'record'
  return null
}

/** The unfinished upload that this file continues: same name, same size. */
export function findUnfinished(file: { name: string, size: number }, unfinished: Upload[]): Upload | undefined {
  return unfinished.find(upload => upload.state === 'receiving' && upload.filename === file.name && upload.bytes === file.size)
}

/** What a failed upload request means, from the API's own words where there are some. */
export function uploadProblem(cause: unknown): { message: string, waits: 'network' | 'sign-in' | 'person' } {
  const response = (cause as { originalResponse?: { getStatus: () => number, getBody: () => string } | null }).originalResponse
  const status = response?.getStatus() ?? 0
  if (!status) return { message: 'The connection broke. It goes on by itself when the network is back.', waits: 'network' }
  if (status === 401) return { message: 'You were signed out. Sign in again; it goes on where it stopped.', waits: 'sign-in' }
  if (status >= 500 && status !== 507) return { message: 'The server is not ready. It goes on by itself in a moment.', waits: 'network' }
  if (status === 409 || status === 423) return { message: 'The server is still busy with this file. It goes on by itself in a moment.', waits: 'network' }
  return { message: ownWords(response?.getBody()) ?? fallback(status), waits: 'person' }
}

/** The tus routes answer a plain sentence, the rest of the API an error body. */
function ownWords(body: string | undefined): string | null {
  const text = body?.trim() ?? ''
  try {
    const parsed = JSON.parse(text) as { data?: { message?: unknown }, message?: unknown }
    const message = parsed.data?.message ?? parsed.message
    return typeof message === 'string' ? message : null
  } catch {
    return text.length > 0 && text.length < 400 && !text.startsWith('<') ? text : null
  }
}

function fallback(status: number): string {
  if (status === 404 || status === 410) return 'The server no longer has this upload. Remove it here and drop the file again.'
  if (status === 413) return 'This file is larger than allowed.'
  if (status === 507) return 'There is not enough free disk space for this file. Ask the operator to free some, then go on.'
  if (status === 403) return 'You may not upload to this acquisition.'
  return 'The server refused this file. Remove it here and check that it is the right one.'
}

/** Bytes a second over the last few seconds. */
export function speedMeter(windowSeconds = 4) {
  let marks: { seconds: number, bytes: number }[] = []
  return {
    add(bytes: number, seconds: number) {
      marks = [...marks.filter(mark => seconds - mark.seconds <= windowSeconds), { seconds, bytes }]
    },
    reset() {
      marks = []
    },
    get bytesPerSecond(): number | null {
      const first = marks[0]
      const last = marks.at(-1)
      return first && last && last.seconds - first.seconds > 0.2 ? (last.bytes - first.bytes) / (last.seconds - first.seconds) : null
    },
  }
}
