import { newline } from './asciiBytes'
import { latin1, type RandomAccess } from './randomAccess'

const windowBytes = 1 << 16

/** Reads lines of text at any place of a file. */
export class LineReader {
  private window = new Uint8Array(0)
  private offset = 0

  constructor(private readonly source: RandomAccess) {}

  /** The line that begins at a byte, and where the next one begins; null at the end. Lines are at most 64 KiB long. */
  async at(byte: number): Promise<{ text: string, next: number } | null> {
    if (byte >= this.source.size) return null
    const bytes = await this.lineBytes(byte)
    const end = bytes.indexOf(newline)
    const line = end < 0 ? bytes : bytes.subarray(0, end)
    return { text: latin1(line).replace(/\r$/, ''), next: byte + (end < 0 ? bytes.length : end + 1) }
  }

  private async lineBytes(byte: number): Promise<Uint8Array> {
    const held = byte >= this.offset && byte < this.offset + this.window.length ? this.window.subarray(byte - this.offset) : null
    if (held && (held.includes(newline) || this.offset + this.window.length === this.source.size)) return held
    this.offset = byte
    this.window = (await this.source.read(byte, Math.min(windowBytes, this.source.size - byte))).slice()
    return this.window
  }
}
