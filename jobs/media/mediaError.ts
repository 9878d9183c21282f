/** Something is wrong with a clip or with ffmpeg. `code` is kebab-case and stable; the message says what to do. */
export class MediaError extends Error {
  override name = 'MediaError'
  constructor(readonly code: string, message: string, readonly details: { stderrTail?: string, cause?: unknown } = {}) {
    super(message, { cause: details.cause })
  }

  get stderrTail(): string {
    return this.details.stderrTail ?? ''
  }
}
