import type { Action } from '@/shared/domain/permissions.ts'

export interface SitePage {
  /** The route's name. */
  name: string
  /** Key of its title. */
  title: string
  needs: Action
}

/** The pages that the frame leads to, in its order. */
export const sitePages: readonly SitePage[] = [
  { name: 'tonight', title: 'frame.title.tonight', needs: 'site.view' },
  { name: 'pieces', title: 'frame.title.pieces', needs: 'history.view' },
  { name: 'cookers', title: 'frame.title.cookers', needs: 'site.view' },
  { name: 'devices', title: 'frame.title.devices', needs: 'device.view' },
  { name: 'server', title: 'frame.title.server', needs: 'server.manage' },
]
