import { LampsumError } from '#shared/errors'

const gibibyte = 2 ** 30

/** Kept free for results, logs and the database; LAMPSUM_DISK_HEADROOM_BYTES changes it. */
export const diskHeadroomBytes = () => {
  const value = Number(process.env.LAMPSUM_DISK_HEADROOM_BYTES || gibibyte)
  return Number.isFinite(value) && value >= 0 ? value : gibibyte
}

/** @throws LampsumError when the file would not fit beside what is promised to other uploads */
export function requireSpace({ bytes, freeBytes, promisedBytes, headroomBytes }: { bytes: number, freeBytes: number, promisedBytes: number, headroomBytes: number }): void {
  const left = freeBytes - promisedBytes - headroomBytes
  if (bytes <= left) return
  throw new LampsumError('disk-full', `This file needs ${inGigabytes(bytes)}, and ${inGigabytes(Math.max(0, left))} are free for uploads. Ask the operator to free some space, then upload it again.`)
}

const inGigabytes = (bytes: number) => `${(bytes / 1e9).toLocaleString('en', { maximumFractionDigits: bytes < 1e9 ? 3 : 1 })} GB`
