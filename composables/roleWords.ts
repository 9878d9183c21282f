import type { Role } from '#shared/permissions'

/** What each role comes to Lampsum for. */
export const roleWords: Record<Role, string> = {
  technician: 'registers acquisitions and uploads clips and records',
  analyst: 'reviews alignments and cut lists, rejects repetitions, releases frame sets',
  operator: 'keeps queue, runners and disk healthy',
  admin: 'manages people; may do everything',
  guest: 'downloads released frame sets of campaigns opened to them',
}
