/** One catalogue of everything the API may refuse: code → HTTP status and a sentence that says what to do. */
export const errorCatalogue = {
  'sign-in-needed': [401, 'Sign in, or send a valid token.'],
  'wrong-credentials': [401, 'E-mail or password is wrong. Check both, or ask for a new password.'],
  'too-many-attempts': [429, 'Too many attempts. Wait a minute, then try again.'],
  'not-allowed': [403, 'Your role may not do this. Ask an admin if you need it.'],
  'cross-site': [403, 'This request came from another site and was refused. Open Lampsum itself and try again.'],
  'not-found': [404, 'There is nothing here that you may see. Check the address.'],
  'bad-input': [400, 'Some values do not fit. Correct the marked fields and send again.'],
  'link-expired': [410, 'This link was used already or has run out. Ask for a new one.'],
  'email-taken': [409, 'Somebody with this e-mail exists already. Use another, or change that person.'],
  'last-admin': [409, 'This is the last active admin. Make another person admin first.'],
  'not-ready': [409, 'Something is missing before this can run.'],
  'wrong-state': [409, 'This has moved on in the meantime. Reload to see its present state.'],
  'changed-meanwhile': [409, 'Somebody else changed this in the meantime. Reload, then make your change again.'],
  'disk-full': [507, 'There is not enough free disk space for this. Free some space or ask the operator.'],
  'too-large': [413, 'This is larger than allowed.'],
  'upload-refused': [400, 'This upload cannot be accepted.'],
  'range-not-satisfiable': [416, 'The asked range lies outside the file. Ask for a range inside it.'],
  'server-error': [500, 'Something went wrong here. Try again; if it stays, tell the operator the time it happened.'],
  'database-away': [503, 'The database does not answer right now. Wait a moment and try again; nothing is lost.'],
} as const satisfies Record<string, readonly [number, string]>
export type ErrorCode = keyof typeof errorCatalogue

/** What the API says when it refuses (the body's `data`). */
export interface ErrorBody {
  code: ErrorCode
  message: string
  fields?: Record<string, string>
}

/** A refusal with its catalogue entry; the API's mapper turns it into status and body. */
export class LampsumError extends Error {
  override name = 'LampsumError'
  constructor(readonly code: ErrorCode, message?: string, readonly options: { fields?: Record<string, string>, cause?: unknown } = {}) {
    super(message ?? errorCatalogue[code][1], { cause: options.cause })
  }

  get status(): number {
    return errorCatalogue[this.code][0]
  }
}
