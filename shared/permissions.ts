/**
 * Who may do what. One table, read by the server (every route names its permission), the menus and the tests.
 * Reading and writing inside a campaign also asks for access to that campaign: everybody who works in the
 * laboratory sees every campaign; guests see only those opened to them.
 */
export const roles = ['technician', 'analyst', 'operator', 'admin', 'guest'] as const
export type Role = (typeof roles)[number]

export const permissions = {
  'campaign.read': ['technician', 'analyst', 'operator', 'guest'],
  'campaign.write': ['technician', 'analyst'],
  'campaign.access': ['analyst'],
  'acquisition.read': ['technician', 'analyst', 'operator'],
  'acquisition.write': ['technician', 'analyst'],
  'upload.write': ['technician', 'analyst'],
  'upload.read': ['technician', 'analyst', 'operator'],
  'process.run': ['technician', 'analyst', 'operator'],
  'alignment.write': ['analyst'],
  'cutList.write': ['analyst'],
  'job.read': ['technician', 'analyst', 'operator'],
  'job.control': ['operator', 'analyst'],
  'frameSet.read': ['technician', 'analyst', 'operator', 'guest'],
  'frameSet.solve': ['analyst'],
  'frameSet.release': ['analyst'],
  'cameraProfile.read': ['technician', 'analyst', 'operator'],
  'cameraProfile.write': [],
  'people.manage': [],
  'mail.read': [],
  'audit.read': [],
  /** Signed in, whatever the role. */
  'self': ['technician', 'analyst', 'operator', 'guest'],
} as const satisfies Record<string, readonly Role[]>
export type Permission = keyof typeof permissions

/** An admin can do all. */
export function can(role: Role, permission: Permission): boolean {
  return role === 'admin' || (permissions[permission] as readonly Role[]).includes(role)
}

/** Roles that see every campaign; a guest needs a row in `campaign_guests`. */
export function seesEveryCampaign(role: Role): boolean {
  return role !== 'guest'
}
