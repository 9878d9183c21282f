/** What of a file a request asks for (RFC 9110, section 14); ends are inclusive. */
export type AskedRange = { kind: 'whole' } | { kind: 'part', start: number, end: number } | { kind: 'unsatisfiable' }

const whole: AskedRange = { kind: 'whole' }

/** One range of bytes; several at once, other units and malformed headers are answered with the whole file. */
export function parseRange(header: string | undefined, bytes: number): AskedRange {
  const match = /^bytes\s*=\s*(\d*)\s*-\s*(\d*)\s*$/i.exec(header ?? '')
  if (!match || (!match[1] && !match[2])) return whole
  if (!match[1]) {
    const length = Math.min(Number(match[2]), bytes)
    return length > 0 ? { kind: 'part', start: bytes - length, end: bytes - 1 } : { kind: 'unsatisfiable' }
  }
  const start = Number(match[1])
  const end = match[2] ? Math.min(Number(match[2]), bytes - 1) : bytes - 1
  if (match[2] && Number(match[2]) < start) return whole
  return start < bytes ? { kind: 'part', start, end } : { kind: 'unsatisfiable' }
}

/** If-Range: the part is only of use when the file is still the one the client has the rest of. A date never matches: files have none. */
export const mayAnswerPart = (ifRange: string | undefined, etag: string) => ifRange === undefined || ifRange.trim() === etag

/** If-None-Match, compared weakly. */
export function isUnchanged(ifNoneMatch: string | undefined, etag: string): boolean {
  if (ifNoneMatch === undefined) return false
  return ifNoneMatch.split(',').map(tag => tag.trim().replace(/^W\//, '')).some(tag => tag === '*' || tag === etag)
}
