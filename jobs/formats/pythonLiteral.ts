export type PythonLiteral = string | number | boolean | null | PythonLiteral[] | { [key: string]: PythonLiteral }

const token = /\s*(?:([[\](){},:])|[bu]?'((?:[^'\\]|\\.)*)'|[bu]?"((?:[^"\\]|\\.)*)"|(True|False|None)|(-?\d+(?:\.\d*)?(?:e[+-]?\d+)?)L?)/iy
const closing: Record<string, string> = { '[': ']', '(': ')', '{': '}' }
const words: Record<string, boolean | null> = { True: true, False: false, None: null }

/**
 * Read a Python literal of the kind that NPY headers hold: dictionaries, lists, tuples (both as arrays), strings,
 * numbers, True, False and None. A bracketed single value without a comma is that value.
 *
 * @returns undefined for anything else
 */
export function parsePythonLiteral(text: string): PythonLiteral | undefined {
  try {
    return new Reader(text).value()
  } catch {
    return undefined
  }
}

class Reader {
  private at = 0
  constructor(private readonly text: string) {}

  private next(): RegExpExecArray {
    token.lastIndex = this.at
    const found = token.exec(this.text)
    if (!found) throw new SyntaxError(`No literal at ${this.at}`)
    this.at = token.lastIndex
    return found
  }

  private takes(sign: string): boolean {
    const before = this.at
    if (this.next()[1] === sign) return true
    this.at = before
    return false
  }

  value(): PythonLiteral {
    const [, sign, single, double, word, number] = this.next()
    if (sign === '{') return this.dictionary()
    if (sign === '[' || sign === '(') return this.sequence(sign)
    if (word) return words[word]
    if (number) return Number(number)
    const string = single ?? double
    if (string === undefined) throw new SyntaxError(`No value at ${this.at}`)
    return string.replace(/\\(.)/g, '$1')
  }

  private sequence(open: string): PythonLiteral {
    const items: PythonLiteral[] = []
    let commas = 0
    while (!this.takes(closing[open])) {
      items.push(this.value())
      if (this.takes(',')) commas++
    }
    return open === '(' && items.length === 1 && commas === 0 ? items[0] : items
  }

  private dictionary(): PythonLiteral {
    const entries: [string, PythonLiteral][] = []
    while (!this.takes('}')) {
      const key = String(this.value())
      if (!this.takes(':')) throw new SyntaxError(`No value for ${key}`)
      entries.push([key, this.value()])
      this.takes(',')
    }
    return Object.fromEntries(entries)
  }
}
