/** The parts a person (or a wall display) may play at a site. */
export const roles = ['crew', 'lead', 'prep', 'manager', 'engineer', 'owner', 'display'] as const
export type Role = (typeof roles)[number]

/**
 * Who may do what: the one matrix. HTTP routes, socket rooms and the client's guards read it;
 * a test walks every endpoint against it.
 */
export const matrix = {
  'site.view': ['crew', 'lead', 'prep', 'manager', 'engineer', 'owner', 'display'],
  'history.view': ['crew', 'lead', 'prep', 'manager', 'engineer', 'owner'],
  'cook.log': ['crew', 'lead', 'manager', 'owner'],
  'piece.start': ['crew', 'lead', 'manager', 'owner'],
  'piece.edit': ['crew', 'lead', 'manager', 'owner'],
  'probe.place': ['crew', 'lead', 'manager', 'engineer', 'owner'],
  'service.edit': ['lead', 'manager', 'owner'],
  'cooker.edit': ['lead', 'engineer', 'owner'],
  'device.view': ['lead', 'manager', 'engineer', 'owner'],
  'device.manage': ['engineer', 'owner'],
  'server.manage': ['engineer', 'owner'],
} as const satisfies Record<string, readonly Role[]>

export type Action = keyof typeof matrix

/** Whether someone with these roles at a site may do this there. */
export function may(heldRoles: readonly Role[], action: Action): boolean {
  const allowed: readonly Role[] = matrix[action]
  return heldRoles.some((role) => allowed.includes(role))
}
