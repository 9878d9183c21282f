/** A DAQ record cannot be read. `code` is kebab-case and stable; the message names the line and says what to do. */
export class RecordError extends Error {
  override name = 'RecordError'
  constructor(readonly code: string, message: string) {
    super(message)
  }
}
