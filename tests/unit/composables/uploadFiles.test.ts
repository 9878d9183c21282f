import { describe, expect, it } from 'vitest'
import { sampleFile } from '../../../composables/fileSample'
import { findUnfinished, guessKind, speedMeter, uploadProblem } from '../../../composables/uploadFiles'
import type { Upload } from '../../../shared/schemas/campaigns'

const refusal = (status: number, body = '') => ({ originalResponse: { getStatus: () => status, getBody: () => body } })

describe('what a dropped file is', () => {
  it('knows clips and records by ending or type, and asks otherwise', () => {
    expect(guessKind('C0042.MP4')).toBe('clip')
    expect(guessKind('run.csv')).toBe('record')
    expect(guessKind('take', 'video/quicktime')).toBe('clip')
    expect(guessKind('README')).toBeNull()
    expect(guessKind('photo.jpg', 'image/jpeg')).toBeNull()
  })
  it('continues the unfinished upload of the same name and size only', () => {
    const unfinished = [{ id: 'u1', filename: 'C0042.MP4', bytes: 100, state: 'receiving' }, { id: 'u2', filename: 'run.csv', bytes: 5, state: 'verifying' }] as Upload[]
    expect(findUnfinished({ name: 'C0042.MP4', size: 100 }, unfinished)?.id).toBe('u1')
    expect(findUnfinished({ name: 'C0042.MP4', size: 101 }, unfinished)).toBeUndefined()
    expect(findUnfinished({ name: 'run.csv', size: 5 }, unfinished)).toBeUndefined()
  })
})

describe('the sample of a file', () => {
  const bytes = (change?: number) => {
    const data = Uint8Array.from({ length: 3_000_000 }, (_, index) => (index * 31) & 255)
    if (change !== undefined) data[change]! ^= 1
    return new Blob([data])
  }
  it('is the same for the same bytes', async () => {
    expect(await sampleFile(bytes())).toBe(await sampleFile(bytes()))
  })
  it.each([0, 30_000, 2_999_999])('tells a file apart by a flipped bit at %i', async (at) => {
    expect(await sampleFile(bytes(at))).not.toBe(await sampleFile(bytes()))
  })
  it('tells files of another length apart', async () => {
    expect(await sampleFile(new Blob(['a']))).not.toBe(await sampleFile(new Blob(['aa'])))
    expect(await sampleFile(new Blob([]))).toMatch(/^0-/)
  })
})

describe('what a failed upload waits for', () => {
  it('waits for the network, the server or another request by itself', () => {
    for (const cause of [new Error('network'), refusal(503), refusal(500), refusal(423), refusal(409)]) expect(uploadProblem(cause).waits).toBe('network')
  })
  it('waits for sign-in when the session has ended', () => {
    expect(uploadProblem(refusal(401)).waits).toBe('sign-in')
  })
  it('gives the server\'s words to the person when it will not go on by itself', () => {
    const body = JSON.stringify({ data: { code: 'disk-full', message: 'There is not enough free disk space for this. Free some space or ask the operator.' } })
    expect(uploadProblem(refusal(507, body))).toEqual({ waits: 'person', message: 'There is not enough free disk space for this. Free some space or ask the operator.' })
    expect(uploadProblem(refusal(400, 'This acquisition does not exist.\n')).message).toBe('This acquisition does not exist.')
    expect(uploadProblem(refusal(410, '<html>')).message).toContain('drop the file again')
  })
})

describe('speed', () => {
  it('is the bytes of the last seconds over their time', () => {
    const meter = speedMeter(4)
    for (let second = 0; second <= 10; second++) meter.add(second < 5 ? second * 1e6 : 5e6 + (second - 5) * 3e6, second)
    expect(meter.bytesPerSecond).toBeCloseTo(3e6, -4)
  })
  it('is not known before something has moved', () => {
    const meter = speedMeter()
    meter.add(0, 1)
    expect(meter.bytesPerSecond).toBeNull()
  })
})
