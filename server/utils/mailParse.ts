/**
 * Subject and plain text of a mail as Lampsum itself sends it: one part, RFC 5322 headers, RFC 2047 encoded words,
 * RFC 2045 transfer encodings. `raw` holds one character a byte (latin1).
 */
export function parseMail(raw: string): { subject: string, text: string } {
  const split = /\r?\n\r?\n/.exec(raw)
  const head = split ? raw.slice(0, split.index) : raw
  const body = split ? raw.slice(split.index + split[0].length) : ''
  const unfolded = head.replaceAll(/\r?\n[ \t]+/g, ' ')
  const header = (name: string) => new RegExp(`^${name}:[ \\t]*(.*)$`, 'im').exec(unfolded)?.[1]?.trim() ?? ''
  const text = decodeBody(body, header('Content-Transfer-Encoding').toLowerCase())
  return { subject: decodeWords(header('Subject')), text: text.replaceAll('\r\n', '\n') }
}

function decodeBody(body: string, encoding: string): string {
  if (encoding === 'base64') return Buffer.from(body, 'base64').toString('utf8')
  if (encoding === 'quoted-printable') return utf8(decodeHex(body.replaceAll(/=[ \t]*\r?\n/g, '')))
  return utf8(body)
}

/** Encoded words that follow one another belong together; the blank between them does not count. */
function decodeWords(value: string): string {
  const joined = value.replaceAll(/(=\?[^?]+\?[bq]\?[^?]*\?=)\s+(?==\?)/gi, '$1')
  return joined.replaceAll(/=\?[^?]+\?([bq])\?([^?]*)\?=/gi, (_, kind: string, word: string) => kind.toLowerCase() === 'b'
    ? Buffer.from(word, 'base64').toString('utf8')
    : utf8(decodeHex(word.replaceAll('_', ' '))))
}

const decodeHex = (value: string) => value.replaceAll(/=([\dA-F]{2})/gi, (_, code: string) => String.fromCharCode(Number.parseInt(code, 16)))
const utf8 = (bytes: string) => Buffer.from(bytes, 'latin1').toString('utf8')
