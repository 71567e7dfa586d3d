import { cookerEndpoints } from '#shared/contract/cooker.ts'
import type { Mount } from '../../http/mount.ts'
import type { CookerService } from './service.ts'

export function cookerRoutes(mount: Mount, { cookers }: { cookers: CookerService }): void {
  mount(cookerEndpoints.list, async ({ site }) => ({ items: await cookers.listOfSite(site.id) }))
  mount(cookerEndpoints.add, ({ person, site, body }) => cookers.add({ person, site }, body))
  mount(cookerEndpoints.change, ({ person, site, params, version, body }) =>
    cookers.change({ person, site }, params.cookerId, version, body),
  )
  mount(cookerEndpoints.placeProbe, ({ person, site, params, body }) =>
    cookers.placeProbe({ person, site }, params.cookerId, body.channelId),
  )
}
