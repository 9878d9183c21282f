import { crc32 as zlibCrc32 } from 'node:zlib'
import { describe, expect, it } from 'vitest'
import { combineCrc32, crc32 } from '../../../jobs/formats/crc32'
import { random } from '../imaging/pictures'

const next = random(12)
const bytes = (length: number) => Uint8Array.from({ length }, () => Math.floor(next() * 256))

describe('CRC-32', () => {
  it('gives the check value of the catalogue: CBF43926 for "123456789" (CRC-32/ISO-HDLC)', () => {
    expect(crc32(new TextEncoder().encode('123456789')).toString(16)).toBe('cbf43926')
  })

  it.each([[0, 5], [5, 0], [1, 1], [9, 1000], [1000, 8_294_400]])('of %i and %i bytes one after another follows from the CRC of each, as zlib finds it', (first, second) => {
    const [a, b] = [bytes(first), bytes(second)]
    expect(combineCrc32(crc32(a), crc32(b), b.length)).toBe(zlibCrc32(b, zlibCrc32(a)))
  })
})
