import { siteEndpoints } from '#shared/contract/site.ts'
import type { Mount } from '../../http/mount.ts'
import type { SiteService } from './service.ts'

export function siteRoutes(mount: Mount, { sites }: { sites: SiteService }): void {
  mount(siteEndpoints.list, async ({ person }) => ({ items: await sites.listOf(person) }))
}
