/** Records of the ZIP format (PKWARE APPNOTE 6.3), stored members only, timestamps fixed so that bytes repeat. */

export interface ZipMember {
  name: string
  bytes: number
  crc: number
  /** Where its local header lies. */
  offset: number
}

const limit32 = 0xffffffff
/** 1 January 1980, 00:00: the format's zero. */
const date = 0x0021
const utf8Names = 0x0800

class Writer {
  private readonly values: number[] = []
  private put(value: number, bytes: number): this {
    for (let i = 0; i < bytes; i++) this.values.push(Math.floor(value / 2 ** (8 * i)) % 256)
    return this
  }

  u16 = (value: number) => this.put(value, 2)
  u32 = (value: number) => this.put(value, 4)
  u64 = (value: number) => this.put(value, 8)
  raw(bytes: Uint8Array): this {
    this.values.push(...bytes)
    return this
  }

  done = () => Uint8Array.from(this.values)
}

const isLarge = ({ bytes, offset }: ZipMember, zip64: boolean) => zip64 || bytes >= limit32 || offset >= limit32

export function localHeader(member: ZipMember, zip64 = false): Uint8Array {
  const name = new TextEncoder().encode(member.name)
  const large = zip64 || member.bytes >= limit32
  const writer = new Writer().u32(0x04034b50).u16(large ? 45 : 20).u16(utf8Names).u16(0).u16(0).u16(date).u32(member.crc)
    .u32(large ? limit32 : member.bytes).u32(large ? limit32 : member.bytes).u16(name.length).u16(large ? 20 : 0).raw(name)
  if (large) writer.u16(1).u16(16).u64(member.bytes).u64(member.bytes)
  return writer.done()
}

function centralHeader(member: ZipMember, zip64: boolean): Uint8Array {
  const name = new TextEncoder().encode(member.name)
  const large = isLarge(member, zip64)
  const version = large ? 45 : 20
  const writer = new Writer().u32(0x02014b50).u16(version).u16(version).u16(utf8Names).u16(0).u16(0).u16(date).u32(member.crc)
    .u32(large ? limit32 : member.bytes).u32(large ? limit32 : member.bytes).u16(name.length).u16(large ? 28 : 0)
    .u16(0).u16(0).u16(0).u32(0).u32(large ? limit32 : member.offset).raw(name)
  if (large) writer.u16(1).u16(24).u64(member.bytes).u64(member.bytes).u64(member.offset)
  return writer.done()
}

/** Central directory and its end, to be written at `offset`, after the last member. */
export function centralDirectory(members: readonly ZipMember[], offset: number, zip64 = false): Uint8Array {
  const headers = members.map(member => centralHeader(member, zip64))
  const bytes = headers.reduce((sum, header) => sum + header.length, 0)
  const writer = new Writer()
  for (const header of headers) writer.raw(header)
  const large = zip64 || offset >= limit32 || members.length >= 0xffff
  if (large) {
    writer.u32(0x06064b50).u64(44).u16(45).u16(45).u32(0).u32(0).u64(members.length).u64(members.length).u64(bytes).u64(offset)
    writer.u32(0x07064b50).u32(0).u64(offset + bytes).u32(1)
  }
  const count = large ? 0xffff : members.length
  return writer.u32(0x06054b50).u16(0).u16(0).u16(count).u16(count).u32(large ? limit32 : bytes).u32(large ? limit32 : offset).u16(0).done()
}
